"""At most so many at once and so many waiting; work whose client has left is stopped."""

from __future__ import annotations

import asyncio
import threading
from typing import Any

import pytest

from perf.errors import Cancelled
from service.admission import Admission, Busy, Flag

LONGEST_S = 20.0  # a piece of work that nobody stops ends by itself, so that a failing test ends


class Client:
    """A request whose client leaves when told."""

    def __init__(self) -> None:
        self.gone = False

    async def is_disconnected(self) -> bool:
        return self.gone


class Work:
    """Waits for its release or the flag."""

    def __init__(self) -> None:
        self.started = threading.Event()
        self.release = threading.Event()
        self.stopped = False

    def __call__(self, flag: Flag) -> str:
        self.started.set()
        for _ in range(int(LONGEST_S / 0.005)):
            if flag[0]:
                self.stopped = True
                raise Cancelled
            if self.release.wait(0.005):
                break
        return "done"


async def until(condition: Any) -> None:
    """Wait until something holds."""
    for _ in range(int(LONGEST_S / 2 / 0.005)):
        if condition():
            return
        await asyncio.sleep(0.005)
    raise AssertionError("it never came true")


def test_places_are_counted_and_the_next_is_refused() -> None:
    async def play() -> None:
        admission = Admission("test", 2, 3)
        works = [Work() for _ in range(5)]
        tasks = [asyncio.create_task(admission.run(work)) for work in works]
        await until(lambda: admission.running == 2)
        assert (admission.running, admission.waiting) == (2, 3)  # Derived: 2 at once, 3 wait
        with pytest.raises(Busy):
            await admission.run(Work())
        for work in works:
            work.release.set()
        assert await asyncio.gather(*tasks) == ["done"] * 5
        assert (admission.running, admission.waiting) == (0, 0)
        assert await admission.run(lambda _: 7) == 7
        admission.stop()

    asyncio.run(play())


def test_work_stops_when_its_client_leaves_and_waiting_work_never_starts() -> None:
    async def play() -> None:
        admission = Admission("test", 1, 1)
        running, waiting = Work(), Work()
        clients: list[Any] = [Client(), Client()]
        first = asyncio.create_task(admission.run(running, clients[0]))
        await until(lambda: admission.running == 1)
        second = asyncio.create_task(admission.run(waiting, clients[1]))
        await until(lambda: admission.waiting == 1)
        clients[1].gone = True
        with pytest.raises(Cancelled):
            await second
        assert not running.stopped
        clients[0].gone = True
        with pytest.raises(Cancelled):
            await first
        assert running.stopped
        assert not waiting.started.is_set()
        assert await admission.run(lambda _: 7) == 7
        admission.stop()

    asyncio.run(play())


def test_an_error_of_the_work_comes_through() -> None:
    async def play() -> None:
        admission = Admission("test", 1, 0)

        def fail(_: Flag) -> None:
            raise ValueError("no")

        with pytest.raises(ValueError, match="no"):
            await admission.run(fail)
        assert admission.running == 0
        admission.stop()

    asyncio.run(play())


def test_stopping_ends_running_and_waiting_work() -> None:
    async def play() -> None:
        admission = Admission("test", 1, 1)
        running, waiting = Work(), Work()
        tasks = [asyncio.create_task(admission.run(running))]
        await until(running.started.is_set)
        tasks.append(asyncio.create_task(admission.run(waiting)))
        await until(lambda: admission.waiting == 1)
        await asyncio.to_thread(admission.stop)
        ends = await asyncio.gather(*tasks, return_exceptions=True)
        assert [type(end) for end in ends] == [Cancelled, Cancelled]
        assert running.stopped
        assert not waiting.started.is_set()
        with pytest.raises(Cancelled):
            await admission.run(Work())

    asyncio.run(play())
