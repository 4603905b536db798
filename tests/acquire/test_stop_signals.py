import os
import signal
import threading

import pytest

from pitchsweep.acquire.stop_signals import EXIT_STOPPED, StopRequested, StopSignals


@pytest.mark.parametrize("name", ["SIGINT", "SIGTERM", "SIGHUP"])
def test_a_signal_asks_for_dark_at_once_and_is_seen_at_the_next_check(
    name: str,
) -> None:
    dark = threading.Event()
    before = signal.getsignal(getattr(signal, name))
    with StopSignals() as stop:
        stop.on_request = dark.set
        stop.check()
        os.kill(os.getpid(), getattr(signal, name))
        assert dark.wait(5.0)
        with pytest.raises(StopRequested, match=name):
            stop.check()
    assert signal.getsignal(getattr(signal, name)) == before


def test_a_second_sigint_asks_for_dark_and_leaves_at_once() -> None:
    left = threading.Event()
    codes: list[int] = []
    darks: list[int] = []

    def leave(code: int) -> None:
        codes.append(code)
        left.set()

    with StopSignals(leave=leave) as stop:
        stop.on_request = lambda: darks.append(1)
        os.kill(os.getpid(), signal.SIGINT)
        os.kill(os.getpid(), signal.SIGINT)
        stop.request("SIGINT")
        assert left.wait(5.0)
    assert codes[0] == EXIT_STOPPED and len(darks) >= 2


def test_a_gate_that_fails_does_not_end_the_watch() -> None:
    asked = threading.Semaphore(0)

    def fail() -> None:
        asked.release()
        raise RuntimeError

    with StopSignals(leave=lambda _: None) as stop:
        stop.on_request = fail
        stop.request("SIGTERM")
        stop.request("SIGTERM")
        assert asked.acquire(timeout=5.0) and asked.acquire(timeout=5.0)
