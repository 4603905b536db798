"""One connection to the twin's own door: numbered JSON questions (acts)."""

import json
import socket
import threading
import time
from dataclasses import dataclass
from typing import Any

from pitchsweep.drivers.driver_errors import (
    AnsweredNonsense,
    DeviceRefused,
    LineBroke,
    NoAnswerInTime,
)

LONGEST_ANSWER_BYTES = 4 * 1024 * 1024
ANSWER_TIMEOUT_S = 30.0


@dataclass(frozen=True)
class TwinAddress:
    """Where a twin's door is, and the token that opens it."""

    host: str
    port: int
    token: str


class TwinLink:
    """Asks one question at a time, from any thread; late answers are dropped."""

    def __init__(self, address: TwinAddress) -> None:
        self._name = f"twin at {address.host}:{address.port}"
        self._lock = threading.Lock()
        self._number = 0
        self._held = b""
        try:
            self._socket = socket.create_connection((address.host, address.port), 5.0)
            self._socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            self._send({"token": address.token})
        except OSError as error:
            raise LineBroke(self._name, "connecting", error) from error

    def ask(
        self, name: str, *, timeout_s: float = ANSWER_TIMEOUT_S, **fields: Any
    ) -> Any:
        """The answer to question ``name``, as JSON gives it.

        Raises LineBroke, NoAnswerInTime, AnsweredNonsense, or DeviceRefused with the
        twin's reason.
        """
        with self._lock:
            self._number += 1
            try:
                self._send({"number": self._number, "ask": name, **fields})
                answer = self._await(name, timeout_s)
            except OSError as error:
                raise LineBroke(self._name, f"asking '{name}'", error) from error
        if "refused" in answer:
            raise DeviceRefused("twin", "declined", f"{name}: {answer['refused']}")
        return answer.get("answer")

    def close(self) -> None:
        """Closes the connection."""
        self._socket.close()

    def _send(self, message: dict[str, Any]) -> None:
        self._socket.sendall(json.dumps(message).encode("utf-8") + b"\n")

    def _await(self, name: str, timeout_s: float) -> dict[str, Any]:
        deadline_s = time.monotonic() + timeout_s
        while True:
            answer = self._read_line(name, timeout_s, deadline_s)
            if answer.get("number") == self._number:
                return answer

    def _read_line(
        self, name: str, timeout_s: float, deadline_s: float
    ) -> dict[str, Any]:
        while b"\n" not in self._held:
            left_s = deadline_s - time.monotonic()
            if left_s <= 0.0:
                raise NoAnswerInTime("twin", name, timeout_s)
            self._socket.settimeout(left_s)
            try:
                data = self._socket.recv(65536)
            except TimeoutError:
                raise NoAnswerInTime("twin", name, timeout_s) from None
            if not data:
                raise LineBroke(self._name, f"asking '{name}'", "closed by the twin")
            self._held += data
            if len(self._held) > LONGEST_ANSWER_BYTES:
                raise AnsweredNonsense("twin", self._held, "answer without an end")
        line, self._held = self._held.split(b"\n", 1)
        try:
            answer = json.loads(line)
        except ValueError:
            raise AnsweredNonsense("twin", line, "not JSON") from None
        if not isinstance(answer, dict):
            raise AnsweredNonsense("twin", line, "not a JSON object")
        return answer
