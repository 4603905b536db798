"""The simulated relay behind a port server: RFC 2217 on a loopback socket (acts).

pyserial's own server side speaks the protocol. On the data wires the twin's box states
its identity and answers the challenge; everything else is the relay's contacts. One
caller at a time, as on any port.
"""

import contextlib
import select
import socket
import threading
from typing import Any

from serial import rfc2217

from pitchsweep.drivers.twin.firmware_lines import Firmware
from pitchsweep.drivers.twin.relay import TimeOutRelay

LOOK_S = 0.005
"""How often contacts are looked at, to report what changed."""


class RelayPort:
    """Serves ``relay`` at ``url`` until ``close``."""

    def __init__(self, relay: TimeOutRelay, box: Firmware) -> None:
        self._relay = relay
        self._box = box
        self._ending = threading.Event()
        self._listener = socket.create_server(("127.0.0.1", 0), backlog=1)
        self.path = f"rfc2217://127.0.0.1:{self._listener.getsockname()[1]}"
        self._thread = threading.Thread(target=self._serve, name="relay", daemon=True)
        self._thread.start()

    def close(self) -> None:
        """Hangs up and listens no more."""
        self._ending.set()
        self._thread.join(timeout=5.0)
        self._listener.close()

    def _serve(self) -> None:
        while not self._ending.is_set():
            self._relay.look()
            if not select.select([self._listener], [], [], LOOK_S)[0]:
                continue
            caller, _ = self._listener.accept()
            with caller, contextlib.suppress(OSError, ValueError):
                self._talk(caller)
            self._relay.hang_up()

    def _talk(self, caller: socket.socket) -> None:
        caller.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        manager = _server(self._relay, _Writer(caller))
        while not self._ending.is_set():
            if select.select([caller], [], [], LOOK_S)[0]:
                data = caller.recv(4096)
                if not data:
                    return
                said = b"".join(manager.filter(data))
                for reply in self._box.receive(said) if said else ():
                    caller.sendall(b"".join(manager.escape(reply.data)))
            self._relay.look()
            manager.check_modem_lines()


# Its published types ask for a port of the library; what it needs is the shape.
_server: Any = rfc2217.PortManager


class _Writer:
    """What the port server writes to."""

    def __init__(self, caller: socket.socket) -> None:
        self._caller = caller

    def write(self, data: bytes) -> None:
        """Sends all of ``data``."""
        self._caller.sendall(data)
