"""Only the newest is worked off; errors reach the caller."""

import asyncio
import threading
import time

from lfpwidgets.newest import Background, Newest
from tests.loops import run


def test_two_hundred_values_at_once_are_one_or_two_calls():
    done, errors = [], []

    async def main():
        newest = Newest(done.append, errors.append)
        for value in range(200):
            newest.put(value)
        await asyncio.sleep(0.05)

    run(main())
    assert done[-1] == 199
    assert len(done) <= 2
    assert errors == []


def test_the_last_value_is_never_lost():
    done = []

    async def main():
        newest = Newest(done.append, done.append)
        for value in range(20):
            newest.put(value)
            await asyncio.sleep(0.003)
        await asyncio.sleep(0.05)

    run(main())
    assert done[-1] == 19
    assert done == sorted(done)


def test_an_error_reaches_the_caller_and_the_next_value_is_done():
    done, errors = [], []

    def work(value):
        if value == "bad":
            raise ValueError("no such window")
        done.append(value)

    async def main():
        newest = Newest(work, errors.append)
        newest.put("bad")
        await asyncio.sleep(0.03)
        newest.put("good")
        await asyncio.sleep(0.03)

    run(main())
    assert [str(error) for error in errors] == ["no such window"]
    assert done == ["good"]


def test_flush_does_what_waits_at_once():
    done = []

    async def main():
        newest = Newest(done.append, done.append)
        newest.put(1)
        newest.flush()
        assert done == [1]
        await asyncio.sleep(0.03)

    run(main())
    assert done == [1]


def test_a_newer_job_stops_the_older():
    delivered, stopped = [], threading.Event()

    def long(stop):
        for _ in range(400):
            if stop():
                stopped.set()
                return "old"
            time.sleep(0.005)
        return "old"

    async def main():
        background = Background(delivered.append)
        background.start(long, delivered.append)
        await asyncio.sleep(0.03)
        background.start(lambda stop: "new", delivered.append)
        await asyncio.sleep(0.1)
        background.close()

    run(main())
    assert stopped.is_set()
    assert delivered == ["new"]


def test_what_is_queued_is_done_and_delivered_whatever_comes_later():
    delivered = []

    async def main():
        background = Background(delivered.append)
        for number in range(3):
            background.queue(lambda number=number: number, delivered.append)
        background.start(lambda stop: "newest", delivered.append)
        await asyncio.sleep(0.1)
        background.close()

    run(main())
    assert delivered == [0, 1, 2, "newest"]


def test_an_error_of_the_newest_job_reaches_the_caller():
    errors = []

    def job(stop):
        raise RuntimeError("out of memory")

    async def main():
        background = Background(errors.append)
        background.start(job, errors.append)
        await asyncio.sleep(0.05)
        background.close()

    run(main())
    assert [str(error) for error in errors] == ["out of memory"]
