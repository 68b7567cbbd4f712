"""The night's clocks: one jumps to the next timer, the other runs faster than the wall."""

import asyncio
import time

import pytest

from orchestrator.engine.clock import JumpingLoop, PacedLoop


def test_a_jumping_night_of_hours_takes_no_time_and_ends_at_its_hour() -> None:
    async def night() -> list[float]:
        clock = asyncio.get_running_loop().time
        seen = []

        async def every(seconds: float, times: int) -> None:
            for _ in range(times):
                await asyncio.sleep(seconds)
                seen.append(clock())

        await asyncio.gather(every(3600, 11), every(5000, 2))
        return seen

    began = time.monotonic()
    with asyncio.Runner(loop_factory=JumpingLoop) as runner:
        seen = runner.run(night())
    assert time.monotonic() - began < 60
    assert seen == sorted(seen)
    assert seen[-1] == pytest.approx(11 * 3600)
    assert seen.count(pytest.approx(5000)) == 1


def test_a_jumping_clock_stands_still_while_something_is_ready() -> None:
    async def busy() -> float:
        clock = asyncio.get_running_loop().time
        asyncio.get_running_loop().call_later(10, lambda: None)
        for _ in range(1000):
            await asyncio.sleep(0)
        return clock()

    with asyncio.Runner(loop_factory=JumpingLoop) as runner:
        assert runner.run(busy()) == 0.0


def test_a_paced_night_runs_as_many_times_faster() -> None:
    async def night() -> float:
        clock = asyncio.get_running_loop().time
        began = clock()
        await asyncio.sleep(20)
        return clock() - began

    began = time.monotonic()
    with asyncio.Runner(loop_factory=lambda: PacedLoop(100)) as runner:
        slept = runner.run(night())
    assert slept >= 20
    assert 0.2 <= time.monotonic() - began < 60


@pytest.mark.parametrize("pace", [0, -1, float("nan"), 1e9])
def test_a_pace_that_makes_no_sense_is_refused(pace: float) -> None:
    with pytest.raises(ValueError, match="pace"):
        PacedLoop(pace)
