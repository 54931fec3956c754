"""Work that comes faster than it can be done in, only the newest of it done.

`Newest` serves the hand on the event loop; `Background` does the long work in a thread and is
cut short when something newer comes. Errors go to a function of the caller, never into a task
that nobody looks at.
"""

import asyncio
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import Any, Generic, TypeVar

T = TypeVar("T")

#: Pause before work starts, s: messages already in the queue get in first.
PAUSE_S = 0.005


class Newest(Generic[T]):
    """Calls `work` with the newest value put in; those it overtakes are dropped.

    Parameters
    ----------
    work : callable
        Takes one value; runs on the event loop.
    failed : callable
        Takes the exception that `work` raised.
    """

    def __init__(self, work: Callable[[T], None], failed: Callable[[Exception], None]) -> None:
        self._work = work
        self._failed = failed
        self._waiting: list[T] = []
        self._task: asyncio.Task | None = None

    def put(self, value: T) -> None:
        """Replace whatever waits by `value`; needs a running event loop."""
        self._waiting = [value]
        if self._task is None or self._task.done():
            self._task = asyncio.get_running_loop().create_task(self._drain())

    def flush(self) -> None:
        """Do what waits now, before anything else."""
        while self._waiting:
            self._do(self._waiting.pop())

    async def _drain(self) -> None:
        while self._waiting:
            await asyncio.sleep(PAUSE_S)
            if self._waiting:
                self._do(self._waiting.pop())

    def _do(self, value: T) -> None:
        try:
            self._work(value)
        except Exception as error:
            self._failed(error)


class Background:
    """Runs one long job at a time in a thread; a newer one stops the older.

    Parameters
    ----------
    failed : callable
        Takes the exception that the newest job raised; called on the event loop.
    """

    def __init__(self, failed: Callable[[Exception], None]) -> None:
        self._failed = failed
        self._turn = 0
        self._threads = ThreadPoolExecutor(max_workers=1)

    def stop(self) -> None:
        """Let the running job end at its next step; its result is not delivered."""
        self._turn += 1

    def start(
        self, job: Callable[[Callable[[], bool]], Any], deliver: Callable[[Any], None]
    ) -> None:
        """Start `job(stop)`; `deliver(result)` is called on the event loop if nothing newer came.

        `stop()` turns true when the job is overtaken.
        """
        self.stop()
        turn = self._turn
        self._submit(job, deliver, lambda: turn != self._turn)

    def queue(self, job: Callable[[], Any], deliver: Callable[[Any], None]) -> None:
        """Do `job()` after those before it; whatever comes later, its result is delivered."""
        self._submit(lambda _stop: job(), deliver, lambda: False)

    def _submit(
        self,
        job: Callable[[Callable[[], bool]], Any],
        deliver: Callable[[Any], None],
        overtaken: Callable[[], bool],
    ) -> None:
        loop = asyncio.get_running_loop()

        def settle(use: Callable[[Any], None], value: Any) -> None:
            if not overtaken():
                use(value)

        def run() -> None:
            if overtaken():
                return
            try:
                result = job(overtaken)
            except Exception as error:
                # The name of an except clause is gone once it ends; keep the error itself.
                loop.call_soon_threadsafe(settle, self._failed, error)
            else:
                loop.call_soon_threadsafe(settle, deliver, result)

        self._threads.submit(run)

    def close(self) -> None:
        """Stop the running job and end the thread."""
        self.stop()
        self._threads.shutdown(wait=False, cancel_futures=True)
