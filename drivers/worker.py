"""One thread that owns one VISA session."""

import asyncio
import contextlib
import queue
import threading
from collections.abc import Callable
from typing import Any

Job = Callable[[], Any]


class Worker:
    """A daemon thread that does one job after the other.

    A daemon, because a VISA call that never returns must not keep the program from ending.

    Parameters
    ----------
    name : str
        Of the thread.
    """

    def __init__(self, name: str) -> None:
        self._loop = asyncio.get_running_loop()
        self._jobs: queue.SimpleQueue[tuple[Job, asyncio.Future[Any]] | None] = queue.SimpleQueue()
        self._thread = threading.Thread(target=self._work, name=name, daemon=True)
        self._thread.start()

    async def run(self, job: Job, stall_s: float) -> Any:
        """Do a job in the thread.

        Raises
        ------
        TimeoutError
            It did not end within ``stall_s``; the thread is lost.
        """
        future: asyncio.Future[Any] = self._loop.create_future()
        self._jobs.put((job, future))
        alarm = self._loop.call_later(stall_s, _stalled, future)
        try:
            return await future
        finally:
            alarm.cancel()

    def stop(self) -> None:
        """End the thread after the jobs that it has."""
        self._jobs.put(None)

    def _work(self) -> None:
        while (item := self._jobs.get()) is not None:
            job, future = item
            result, error = None, None
            try:
                result = job()
            except BaseException as problem:
                error = problem
            with contextlib.suppress(RuntimeError):  # the loop is closed: nobody waits
                self._loop.call_soon_threadsafe(_deliver, future, result, error)


def _stalled(future: asyncio.Future[Any]) -> None:
    if not future.done():
        future.set_exception(TimeoutError())


def _deliver(future: asyncio.Future[Any], result: Any, error: BaseException | None) -> None:
    if future.done():  # cancelled or stalled
        return
    if error is None:
        future.set_result(result)
    else:
        future.set_exception(error)
