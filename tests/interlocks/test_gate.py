"""The gate: what breaks a limit does not reach an instrument, and the refusal says which limit."""

import asyncio
import contextlib
import re
from collections.abc import Coroutine
from typing import Any

import pytest

from orchestrator.interlocks.conditions import Response
from orchestrator.interlocks.gate import Refused, Unanswered
from orchestrator.ledger.reading import NightReader
from tests.interlocks.fakes import DOCUMENT, RIG, Watched

MINUTE_S = 60.0


def do(*commands: Coroutine[Any, Any, None]) -> None:
    async def all_of_them() -> None:
        for command in commands:
            await command

    asyncio.run(all_of_them())


def line_of(*key: str) -> str:
    """File and line of a key, as a refusal must give it."""
    return DOCUMENT.where(*key)


def under_way(watched: Watched, field_t: float, rate_t_per_min: float, target_t: float) -> None:
    """The supply ramps from a field that was just read."""
    watched.gate.observe(watched.reading(field_t))
    gate = watched.gate
    do(gate.rate(rate_t_per_min / MINUTE_S), gate.target(target_t), gate.go())
    watched.log.clear()


def test_a_target_beyond_the_magnet_is_refused_with_how_much_and_where_it_stands(
    watched: Watched,
) -> None:
    watched.gate.observe(watched.reading())
    with pytest.raises(Refused, match=r"target 12\.5 T is 0\.5 T beyond 12 T, ") as caught:
        do(watched.gate.target(12.5))
    assert line_of("magnet", "field_max") in str(caught.value)
    assert re.search(r"demonstration\.toml, line \d+ \(magnet\.field_max\)", str(caught.value))
    assert watched.log == []


@pytest.mark.parametrize("target_t", [float("nan"), float("inf"), -13.0])
def test_no_field_that_the_magnet_has_not_gets_through(watched: Watched, target_t: float) -> None:
    watched.gate.observe(watched.reading())
    with pytest.raises(Refused):
        do(watched.gate.target(target_t))
    assert watched.log == []


def test_a_target_in_a_slower_zone_is_refused_while_the_supply_ramps_fast(watched: Watched) -> None:
    under_way(watched, 5.0, 0.6, 6.0)
    with pytest.raises(Refused, match=r"0\.6 T/min between 5\.0000 T and 7\.0000 T is beyond 0\.3"):
        do(watched.gate.target(7.0))
    assert watched.log == []
    do(watched.gate.rate(0.3 / MINUTE_S), watched.gate.target(7.0))
    assert [one[1] for one in watched.log] == ["rate", "target"]


def test_a_faster_rate_is_refused_as_long_as_the_way_leads_through_the_slower_zone(
    watched: Watched,
) -> None:
    under_way(watched, 6.5, 0.3, 3.0)
    with pytest.raises(Refused, match="magnet table"):
        do(watched.gate.rate(0.6 / MINUTE_S))
    watched.gate.observe(watched.reading(5.9))
    do(watched.gate.rate(0.6 / MINUTE_S))
    assert watched.log == [("magnet", "rate", 0.6 / MINUTE_S)]


def test_how_far_the_field_may_have_come_since_it_was_read_counts(watched: Watched) -> None:
    # At 6.001 T, going down at 0.3 T/min: the edge at 6 T is 0.2 s away, but the reading is old.
    under_way(watched, 6.0005, 0.3, 3.0)
    with pytest.raises(Refused):
        do(watched.gate.rate(0.6 / MINUTE_S))
    # Going up from below the edge: in a second the supply is beyond it.
    under_way(watched, 5.9995, 0.3, 7.0)
    with pytest.raises(Refused):
        do(watched.gate.rate(0.6 / MINUTE_S))


def test_nothing_ramps_on_a_field_that_was_read_too_long_ago(watched: Watched) -> None:
    under_way(watched, 1.0, 0.3, 2.0)
    watched.now_s = RIG.sampling.stale_after_s + 0.1
    with pytest.raises(Refused, match=r"the field was last read 10\.1 s ago") as caught:
        do(watched.gate.target(3.0))
    assert line_of("sampling", "stale_after") in str(caught.value)


def test_go_is_refused_while_rate_or_target_were_never_set(watched: Watched) -> None:
    watched.gate.observe(watched.reading())
    with pytest.raises(Refused, match="never set"):
        do(watched.gate.go())
    with pytest.raises(Refused, match="never set"):
        do(watched.gate.rate(0.001), watched.gate.go())
    assert [one[1] for one in watched.log] == ["rate"]


def test_the_switch_is_not_warmed_on_currents_that_differ(watched: Watched) -> None:
    watched.gate.observe(watched.reading(0.5, persistent_field_t=3.0))
    with pytest.raises(Refused, match=r"leads at 0\.5000 T and coil at 3\.0000 T differ"):
        do(watched.gate.switch_heater(True))
    do(watched.gate.switch_heater(False))
    assert watched.log == [("magnet", "switch_heater", 0.0)]


def test_set_points_and_their_ramp_stay_in_the_stages_range(watched: Watched) -> None:
    high = RIG.stage.temperature_max_k
    with pytest.raises(Refused, match=f"set-point {high + 1:g} K is outside") as caught:
        do(watched.gate.setpoint(high + 1))
    assert line_of("stage", "temperature_max") in str(caught.value)
    with pytest.raises(Refused) as caught:
        do(watched.gate.setpoint_ramp(2 * RIG.stage.ramp_max_k_per_s))
    assert line_of("stage", "ramp_max") in str(caught.value)
    for value in (float("nan"), 0.0, -1.0):
        with pytest.raises(Refused):
            do(watched.gate.setpoint_ramp(value))
    assert watched.log == []


def test_a_setting_that_reads_back_otherwise_is_a_trip_and_is_not_taken_for_set(
    watched: Watched,
) -> None:
    watched.gate.observe(watched.reading())
    watched.parts["magnet"].says["target"] = 2.5
    with pytest.raises(Unanswered, match=r"magnet target: sent 2, reads back 2\.5"):
        do(watched.gate.target(2.0))
    (trip,) = watched.gate.trips
    assert (trip.name, trip.response) == ("read-back-magnet-target", Response.PARK)
    assert watched.gate.ramp.target_t != 2.0


def test_a_command_without_confirmation_is_a_trip(watched: Watched) -> None:
    watched.parts["stage"].says["heater"] = TimeoutError("no reply within 2 s")
    with pytest.raises(Unanswered, match="stage did not confirm heater: no reply within 2 s"):
        do(watched.gate.heater(True))
    assert [one.name for one in watched.gate.trips] == ["unconfirmed-stage-heater"]


def test_every_command_is_recorded_with_its_verdict(watched: Watched) -> None:
    watched.gate.observe(watched.reading())
    watched.parts["magnet"].says["rate"] = 1.0
    for command in (watched.gate.target(2.0), watched.gate.target(20.0), watched.gate.rate(0.001)):
        with contextlib.suppress(Refused, Unanswered):
            do(command)
    watched.ledger.close()
    with NightReader(watched.folder) as night:
        commands = night.commands()
    assert [(one.operation, one.verdict) for one in commands] == [
        ("target", "accepted"),
        ("target", "refused"),
        ("rate", "mismatch"),
    ]
    assert "beyond 12 T" in commands[1].reason
    assert commands[1].sent == ""


def test_under_a_trip_only_what_leads_to_rest_gets_through(watched: Watched) -> None:
    under_way(watched, 3.0, 0.3, 4.0)
    watched.gate.latch("stale-rxx", Response.PARK, "silent")
    gate = watched.gate
    for command in (gate.target(3.5), gate.target(-1.0), gate.setpoint(1.0), gate.heater(True)):
        with pytest.raises(Refused, match="the trip stale-rxx stands"):
            do(command)
    do(gate.hold(), gate.heater(False), gate.target(0.0), gate.go())
    assert [one[1] for one in watched.log] == ["ramping", "heater", "target", "ramping"]


def test_after_a_quench_nothing_reaches_the_ramp(watched: Watched) -> None:
    under_way(watched, 3.0, 0.3, 4.0)
    watched.gate.latch("quench-flag", Response.DISCHARGE, "the supply reports a quench")
    gate = watched.gate
    for command in (gate.target(0.0), gate.rate(0.001), gate.go(), gate.hold()):
        with pytest.raises(Refused, match="never answered with a ramp"):
            do(command)
    with pytest.raises(Refused):
        do(gate.switch_heater(True))
    do(gate.switch_heater(False), gate.heater(False))
    assert [one[:2] for one in watched.log] == [("magnet", "switch_heater"), ("stage", "heater")]


def test_a_trip_stays_until_it_is_acknowledged_by_its_name(watched: Watched) -> None:
    gate = watched.gate
    assert gate.latch("ramp-stalled", Response.HOLD, "does not move") is not None
    assert gate.latch("ramp-stalled", Response.HOLD, "again") is None
    gate.latch("stale-stage", Response.PARK, "silent")
    assert [one.name for one in gate.trips] == ["stale-stage", "ramp-stalled"]  # the worst first
    assert not gate.acknowledge("stalled", "A. Keeper", "no such trip")
    assert gate.acknowledge("stale-stage", "A. Keeper", "plug was loose")
    assert [one.name for one in gate.trips] == ["ramp-stalled"]
    watched.ledger.close()
    with NightReader(watched.folder) as night:
        said = [one for one in night.events() if one.kind == "acknowledge"]
    assert [one.text for one in said] == ["stale-stage acknowledged by A. Keeper: plug was loose"]
