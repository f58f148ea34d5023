"""Who may compute: a few threads of the app's own, a short queue, and a flag that stops work."""

from __future__ import annotations

import asyncio
import threading
from collections.abc import Callable
from concurrent.futures import Future, ThreadPoolExecutor
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray
from starlette.requests import Request

from perf.errors import Cancelled

T = TypeVar("T")
Flag = NDArray[np.uint8]
POLL_S = 0.05  # a departure is seen within this; the kernel then looks at the flag


class Busy(Exception):  # noqa: N818 - not a fault: the client may try again
    """Every place is taken."""


class Admission:
    """Runs work in its own threads, at most so many at once and so many waiting.

    Parameters
    ----------
    name
        Name of the threads.
    at_once
        Pieces of work that run together.
    waiting
        Further pieces that wait; any more are refused.
    """

    def __init__(self, name: str, at_once: int, waiting: int) -> None:
        self._executor = ThreadPoolExecutor(at_once, thread_name_prefix=name)
        self._places = at_once + waiting
        self._lock = threading.Lock()
        self._flags: dict[int, Flag] = {}
        self._running = 0

    @property
    def running(self) -> int:
        """Return how many pieces of work run now."""
        return self._running

    @property
    def waiting(self) -> int:
        """Return how many pieces of work wait."""
        return max(0, len(self._flags) - self._running)

    async def run(self, work: Callable[[Flag], T], request: Request | None = None) -> T:
        """Return the result of `work`, run in a thread.

        Parameters
        ----------
        work
            Takes the flag, a uint8 array of length 1: once it is 1 the work must stop and raise
            `Cancelled`.
        request
            The client's request; when the client leaves, the flag is set, and work that still
            waits never starts.

        Raises
        ------
        Busy
            Every place is taken; nothing was started.
        Cancelled
            The work was stopped.
        """
        flag: Flag = np.zeros(1, dtype=np.uint8)
        future = self._submit(work, flag)
        waiter = asyncio.wrap_future(future)
        try:
            while not (await asyncio.wait({waiter}, timeout=POLL_S))[0]:
                if request is not None and await request.is_disconnected():
                    flag[0] = 1
                    future.cancel()
        finally:
            flag[0] = 1
            future.cancel()
        if waiter.cancelled():
            raise Cancelled
        return waiter.result()

    def halt(self) -> None:
        """Tell all work to stop and take no more; return at once."""
        with self._lock:
            for flag in self._flags.values():
                flag[0] = 1
        self._executor.shutdown(wait=False, cancel_futures=True)

    def stop(self) -> None:
        """Stop all work, take no more, and wait until it has ended."""
        self.halt()
        self._executor.shutdown(wait=True)

    def _submit(self, work: Callable[[Flag], T], flag: Flag) -> Future[T]:
        with self._lock:
            if len(self._flags) >= self._places:
                raise Busy
            self._flags[id(flag)] = flag
        try:
            future = self._executor.submit(self._work, work, flag)
        except RuntimeError:  # the executor has been shut down
            self._leave(flag)
            raise Cancelled from None
        future.add_done_callback(lambda _: self._leave(flag))
        return future

    def _leave(self, flag: Flag) -> None:
        with self._lock:
            self._flags.pop(id(flag), None)

    def _work(self, work: Callable[[Flag], T], flag: Flag) -> T:
        with self._lock:
            self._running += 1
        try:
            if flag[0]:
                raise Cancelled
            return work(flag)
        finally:
            with self._lock:
                self._running -= 1
