"""A pseudo-terminal with a simulated device behind it (acts; POSIX only).

``pty`` and ``tty`` are imported inside functions, so that importing this file works
everywhere.
"""

import contextlib
import heapq
import os
import select
import threading
import time

from pitchsweep.drivers.twin.firmware_lines import Firmware

LONGEST_SLEEP_S = 1.0


class PtyPort:
    """Serves ``firmware`` at ``path`` from a thread of its own until ``close``.

    The far end is kept open here too, so that a controller closing the port neither
    hangs up the line nor loses it.
    """

    def __init__(self, firmware: Firmware, *, name: str) -> None:
        import pty
        import tty

        self._firmware = firmware
        self._near_fd, self._far_fd = pty.openpty()
        tty.setraw(self._far_fd)
        os.set_blocking(self._near_fd, False)
        self._wake_read_fd, self._wake_write_fd = os.pipe()
        self._outgoing: list[tuple[float, int, bytes]] = []
        self._count = 0
        self.path = os.ttyname(self._far_fd)
        self._thread = threading.Thread(target=self._serve, name=name, daemon=True)
        self._thread.start()

    def close(self) -> None:
        """Ends the thread and gives the terminal back."""
        os.write(self._wake_write_fd, b"x")
        self._thread.join(timeout=5.0)
        for fd in (
            self._near_fd,
            self._far_fd,
            self._wake_read_fd,
            self._wake_write_fd,
        ):
            os.close(fd)

    def _serve(self) -> None:
        while True:
            ready, _, _ = select.select(
                [self._near_fd, self._wake_read_fd], [], [], self._sleep_s()
            )
            self._firmware.due_in_s()
            if self._wake_read_fd in ready:
                return
            if self._near_fd in ready:
                self._take(os.read(self._near_fd, 4096))
            self._send_due()

    def _take(self, data: bytes) -> None:
        for reply in self._firmware.receive(data):
            self._count += 1
            due_s = time.monotonic() + reply.after_s
            heapq.heappush(self._outgoing, (due_s, self._count, reply.data))

    def _send_due(self) -> None:
        while self._outgoing and self._outgoing[0][0] <= time.monotonic():
            data = heapq.heappop(self._outgoing)[2]
            with contextlib.suppress(BlockingIOError):
                # What nobody reads is lost; waiting here would hold up the light.
                os.write(self._near_fd, data)

    def _sleep_s(self) -> float:
        due_s = self._firmware.due_in_s()
        sleep_s = LONGEST_SLEEP_S if due_s is None else min(due_s, LONGEST_SLEEP_S)
        if self._outgoing:
            sleep_s = min(sleep_s, self._outgoing[0][0] - time.monotonic())
        return max(sleep_s, 0.0)
