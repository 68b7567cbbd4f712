"""The sentinel: what a reading shows is latched and answered before anything else happens."""

import asyncio
import math
from dataclasses import replace

import pytest

from orchestrator.interlocks.conditions import Response
from tests.interlocks.fakes import RIG, Watched


def see(watched: Watched, **values: float) -> list[str]:
    return asyncio.run(watched.see(watched.reading(**values)))


def let_ramp(watched: Watched) -> None:
    async def ramp() -> None:
        await watched.gate.rate(0.3 / 60)
        await watched.gate.target(4.0)
        await watched.gate.go()

    watched.gate.observe(watched.reading(3.0))
    asyncio.run(ramp())
    watched.log.clear()


def test_a_healthy_reading_trips_nothing_and_gives_every_margin(watched: Watched) -> None:
    assert see(watched) == []
    assert set(watched.sentinel.verdicts) == {one.name for one in watched.sentinel.conditions}
    assert all(0 < one.margin <= 1 for one in watched.sentinel.verdicts.values())
    assert watched.log == []


@pytest.mark.parametrize("channel", ["field_t", "sample_k", "helium_percent"])
def test_what_is_not_a_number_is_a_trip(watched: Watched, channel: str) -> None:
    assert see(watched, **{channel: math.nan})


def test_an_instrument_left_out_trips_by_its_age_and_not_before(watched: Watched) -> None:
    see(watched)
    for second in (5.0, 9.9, 10.1):
        watched.now_s = second
        reading = watched.reading()
        answered = {name: at for name, at in reading.taken_s.items() if name != "stage"}
        names = asyncio.run(watched.see(replace(reading, taken_s=answered)))
        assert names == (["stale-stage"] if second > RIG.sampling.stale_after_s else [])


def test_a_park_puts_the_heater_off_and_holds_the_magnet_at_once(watched: Watched) -> None:
    let_ramp(watched)
    assert see(watched, field_t=3.0, helium_percent=10.0) == ["level-helium"]
    assert watched.log == [("stage", "heater", 0.0), ("magnet", "ramping", 0.0)]
    assert not watched.gate.ramp.ramping


def test_a_quench_puts_the_heater_off_and_sends_nothing_to_the_ramp(watched: Watched) -> None:
    let_ramp(watched)
    assert see(watched, field_t=3.0, quench=1.0) == ["quench-flag"]
    assert watched.log == [("stage", "heater", 0.0)]
    assert watched.gate.trips[0].response == Response.DISCHARGE


def test_a_trip_is_answered_once(watched: Watched) -> None:
    let_ramp(watched)
    see(watched, field_t=3.0, sample_k=100.0)
    watched.log.clear()
    assert see(watched, field_t=3.0, sample_k=100.0) == []
    assert watched.log == []
    assert [one.name for one in watched.gate.trips] == ["over-temperature"]


def test_several_trips_of_one_reading_come_worst_first(watched: Watched) -> None:
    names = see(watched, quench=1.0, sample_k=100.0)
    assert names == ["quench-flag", "over-temperature"]


def test_an_answer_that_fails_does_not_stop_the_others(watched: Watched) -> None:
    let_ramp(watched)
    watched.parts["stage"].says["heater"] = TimeoutError("silent")
    see(watched, field_t=3.0, sample_k=100.0)
    assert ("magnet", "ramping", 0.0) in watched.log
    names = {one.name for one in watched.gate.trips}
    assert names == {"over-temperature", "unconfirmed-stage-heater"}


def test_a_fault_of_the_nights_own_means_is_latched_and_answered_as_a_park(
    watched: Watched,
) -> None:
    let_ramp(watched)
    asyncio.run(watched.sentinel.fault("ledger-failed", "the disk is full"))
    assert watched.log == [("stage", "heater", 0.0), ("magnet", "ramping", 0.0)]
    assert [one.text for one in watched.gate.trips] == ["the disk is full"]
