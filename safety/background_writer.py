"""Slow writes beside the tick: one thread, a bounded queue, the first failure kept."""

import queue
import threading
from collections.abc import Callable
from typing import Generic, TypeVar

_T = TypeVar("_T")
_LONGEST_QUEUE = 1000


class BackgroundWriter(Generic[_T]):
    """Hands items to ``write`` in its own thread; never blocks whoever puts them in.

    ``failure`` is empty until a write raised or the queue was full; after a failed
    write nothing more is written.
    """

    def __init__(
        self, write: Callable[[_T], object], *, longest: int = _LONGEST_QUEUE
    ) -> None:
        self.failure = ""
        self._write = write
        self._queue: queue.Queue[_T | None] = queue.Queue(maxsize=longest)
        self._thread = threading.Thread(target=self._work, daemon=True)
        self._thread.start()

    def put(self, item: _T) -> None:
        """Queues ``item``; a full queue drops it and sets ``failure``."""
        try:
            self._queue.put_nowait(item)
        except queue.Full:
            self.failure = self.failure or "its queue is full"

    def close(self, wait_s: float) -> bool:
        """Writes what is queued, for at most ``wait_s``; True when all was written."""
        try:
            self._queue.put(None, timeout=wait_s)
        except queue.Full:
            return False
        self._thread.join(wait_s)
        return not self._thread.is_alive() and not self.failure

    def _work(self) -> None:
        while (item := self._queue.get()) is not None:
            try:
                self._write(item)
            except Exception as error:
                self.failure = f"{type(error).__name__}: {error}"
                return
