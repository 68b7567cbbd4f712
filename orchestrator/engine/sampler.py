"""The sampler: the one reader. Every reading goes once to the ledger, the sentinel and the step."""

import asyncio
from collections.abc import Callable

from orchestrator.bench import Bench
from orchestrator.interlocks.sentinel import Sentinel
from orchestrator.ledger.writing import Ledger
from orchestrator.readings import Channel, Reading

Answer = tuple[float, float, dict[str, float]]  # asked at, came at, values

_WAIT_SHARE = 0.8  # of the interval; who has not answered by then is late, and absent


class Sampler:
    """Polls the bench at a fixed interval.

    Parameters
    ----------
    bench, channels
        The instruments, and the columns that they fill.
    interval_s : float
        From one reading to the next.
    clock, wall : Callable[[], float]
        The night's clock, and the wall time in seconds since 1970.
    on_reading : Callable[[Reading], None]
        Called with each reading once it is in the ledger and has been judged.
    """

    def __init__(
        self,
        bench: Bench,
        channels: tuple[Channel, ...],
        ledger: Ledger,
        sentinel: Sentinel,
        *,
        interval_s: float,
        clock: Callable[[], float],
        wall: Callable[[], float],
        on_reading: Callable[[Reading], None],
    ) -> None:
        self._bench = bench
        self._nothing = {channel.name: float("nan") for channel in channels}
        self._ledger = ledger
        self._sentinel = sentinel
        self._interval_s = interval_s
        self._clock = clock
        self._wall = wall
        self._on_reading = on_reading
        self._late: dict[str, asyncio.Task[Answer]] = {}
        self._next: asyncio.Future[Reading] = asyncio.get_running_loop().create_future()
        self.number = 0
        self.step = "start"
        self.missed = 0
        self.last_errors: dict[str, str] = {}

    async def next(self) -> Reading:
        """The next reading; raises what stopped the sampler, should it stop."""
        return await asyncio.shield(self._next)

    async def run(self) -> None:
        """Read until cancelled. A reading that would come late is left out and counted."""
        due_s = self._clock()
        try:
            while True:
                await self.sample()
                due_s += self._interval_s
                behind_s = self._clock() - due_s
                if behind_s > 0:
                    skipped = int(behind_s / self._interval_s)
                    self.missed += skipped
                    due_s += skipped * self._interval_s
                await asyncio.sleep(max(0.0, due_s - self._clock()))
        except Exception as error:
            failed, self._next = self._next, asyncio.get_running_loop().create_future()
            failed.set_exception(error)
            failed.exception()  # whoever waits sees it; nobody waiting is no second error

    async def sample(self) -> None:
        """Take one reading and hand it on."""
        asked_s, unix_s = self._clock(), self._wall()
        answers = await self._poll()
        values, taken, asked = dict(self._nothing), {}, {}
        for instrument, (answer_asked_s, taken_s, answer) in answers.items():
            asked[instrument], taken[instrument] = answer_asked_s, taken_s
            values.update(answer)
        self.number += 1
        reading = Reading(self.number, asked_s, unix_s, self.step, values, taken)
        self._ledger.append_reading(reading)
        if self._ledger.failure:
            await self._sentinel.fault("ledger-failed", self._ledger.failure)
        await self._sentinel.observe(reading, asked)
        self._on_reading(reading)
        done, self._next = self._next, asyncio.get_running_loop().create_future()
        done.set_result(reading)

    async def _read(self, instrument: str) -> Answer:
        asked_s = self._clock()
        values = await self._bench.read(instrument)
        return asked_s, self._clock(), values

    async def _poll(self) -> dict[str, Answer]:
        """All instruments at once; who fails is absent, and its age is the sentinel's matter."""
        tasks = dict(self._late)
        for instrument in self._bench.instruments:
            if instrument not in tasks:
                tasks[instrument] = asyncio.ensure_future(self._read(instrument))
        self._late = tasks  # all of them, should this wait be cancelled
        await asyncio.wait(tasks.values(), timeout=_WAIT_SHARE * self._interval_s)
        self._late = {name: task for name, task in tasks.items() if not task.done()}
        answers = {}
        for instrument, task in tasks.items():
            if not task.done():
                continue
            if (error := task.exception()) is None:
                answers[instrument] = task.result()
            else:
                self.last_errors[instrument] = str(error)
        return answers

    async def close(self) -> None:
        """End the polls that are still under way."""
        for task in self._late.values():
            task.cancel()
        await asyncio.gather(*self._late.values(), return_exceptions=True)
