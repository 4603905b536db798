"""Transports: bytes to and from a device. The protocol, and a fake peer.

Loaded by the guard process: standard library only.
"""

from collections import deque
from collections.abc import Callable
from typing import Protocol

from pitchsweep.drivers.driver_errors import LineBroke


class Transport(Protocol):
    """A line to a device. Failures raise LineBroke, never a library's exception."""

    @property
    def name(self) -> str: ...

    def send(self, data: bytes) -> None: ...

    def receive(self, wait_s: float) -> bytes:
        """What has arrived, after waiting at most ``wait_s``; b"" when nothing has."""
        ...

    def close(self) -> None: ...


class FakeTransport:
    """A transport without a port: a peer function and a hand-driven clock.

    ``peer`` gets what is sent and returns (delay_s, bytes) pairs, each arriving that
    long after the sending. ``receive`` advances ``clock_s`` instead of waiting.
    """

    def __init__(
        self,
        peer: Callable[[bytes], list[tuple[float, bytes]]],
        *,
        name: str = "fake line",
    ) -> None:
        self.name = name
        self.clock_s = 0.0
        self.sent: list[bytes] = []
        self.closed = False
        self._peer = peer
        self._coming: deque[tuple[float, bytes]] = deque()

    def now_s(self) -> float:
        """The fake's own time; hand this to a client as its clock."""
        return self.clock_s

    def send(self, data: bytes) -> None:
        if self.closed:
            raise LineBroke(self.name, "sending", "closed")
        self.sent.append(data)
        arriving = [(self.clock_s + after_s, b) for after_s, b in self._peer(data)]
        self._coming = deque(sorted([*self._coming, *arriving], key=lambda p: p[0]))

    def receive(self, wait_s: float) -> bytes:
        if self.closed:
            raise LineBroke(self.name, "receiving", "closed")
        until_s = self.clock_s + max(wait_s, 0.0)
        if not self._coming or self._coming[0][0] > until_s:
            self.clock_s = until_s
            return b""
        at_s, data = self._coming.popleft()
        self.clock_s = max(self.clock_s, at_s)
        return data

    def close(self) -> None:
        self.closed = True
