"""Each interlock trips where it should, and just does not trip where it should not."""

import math
from pathlib import Path

import pytest

from orchestrator.config.rig import load_rig
from orchestrator.interlocks.conditions import (
    Condition,
    Look,
    Ramp,
    Response,
    Sight,
    conditions_of,
)

RIG, _ = load_rig(Path(__file__).parents[2] / "sequences" / "rigs" / "demonstration.toml")
CONDITIONS = {one.name: one for one in conditions_of(RIG)}
SCALE = RIG.magnet.coil_constant_t_per_a
L = RIG.magnet.inductance_h


def magnet(taken_s: float, field_t: float, **other: float) -> Sight:
    current = field_t / SCALE
    values = {
        "field_t": field_t,
        "current_a": current,
        "magnet_v": RIG.magnet.lead_resistance_ohm * current,
        "ramping": 0.0,
        "quench": 0.0,
        "switch_heater": 1.0,
        "persistent_field_t": 0.0,
    }
    return Sight(taken_s, values | other)


def look(before: Sight | None, newest: Sight, ramp: Ramp | None = None, **others: Sight) -> Look:
    return Look(
        now_s=newest.taken_s,
        started_s=0.0,
        newest={"magnet": newest, **others},
        before={} if before is None else {"magnet": before},
        ramp=ramp or Ramp(),
    )


def judge(name: str, what: Look) -> tuple[bool, float]:
    verdict = CONDITIONS[name].judge(what)
    assert 0 <= verdict.margin <= 1
    assert verdict.tripped == (verdict.margin == 0)
    return verdict.tripped, verdict.margin


def ramping(rate_t_per_s: float, target_t: float) -> Ramp:
    return Ramp(rate_t_per_s, target_t, True, changed_s=0.0, heater_changed_s=-1e6)


def test_every_instrument_has_a_stale_interlock_and_the_worst_come_first() -> None:
    for instrument in ("magnet", "stage", "rxx", "rxy", "helium"):
        assert f"stale-{instrument}" in CONDITIONS
    responses = [one.response for one in conditions_of(RIG)]
    assert responses == sorted(responses, reverse=True)
    assert responses[0] == Response.DISCHARGE
    assert all(isinstance(one, Condition) and one.clears for one in CONDITIONS.values())


def test_an_instrument_is_stale_after_the_rigs_time_and_not_before() -> None:
    seen = {"stage": Sight(100.0, {"sample_k": 1.0})}
    assert not CONDITIONS["stale-stage"].judge(Look(109.9, 0.0, seen)).tripped
    assert CONDITIONS["stale-stage"].judge(Look(110.1, 0.0, seen)).tripped


def test_an_instrument_that_never_answered_is_as_old_as_the_watch() -> None:
    assert not CONDITIONS["stale-rxx"].judge(Look(9.0, 0.0, {})).tripped
    assert CONDITIONS["stale-rxx"].judge(Look(10.5, 0.0, {})).tripped


def test_the_field_may_reach_the_largest_and_not_exceed_it() -> None:
    assert not judge("field-ceiling", look(None, magnet(1, -12.0)))[0]
    assert judge("field-ceiling", look(None, magnet(1, -12.02)))[0]


@pytest.mark.parametrize(("field_t", "rate"), [(3.0, 0.6), (8.0, 0.3), (11.0, 0.12)])
def test_the_field_may_move_at_the_zones_rate_and_not_a_fifth_faster(
    field_t: float, rate: float
) -> None:
    for direction in (1, -1):
        for factor, trips in ((1.0, False), (1.25, True)):
            moved = direction * factor * rate / 60 * 10
            what = look(magnet(0, field_t), magnet(10, field_t + moved))
            assert judge("ramp-ceiling", what)[0] is trips


def test_the_supplys_own_flag_is_a_quench() -> None:
    assert not judge("quench-flag", look(None, magnet(1, 5.0)))[0]
    assert judge("quench-flag", look(None, magnet(1, 5.0, quench=1.0)))[0]


def test_a_collapsing_current_is_a_quench_and_the_fastest_ramp_is_not() -> None:
    assert not judge("current-collapse", look(magnet(0, 5.0), magnet(1, 4.99)))[0]
    assert judge("current-collapse", look(magnet(0, 5.0), magnet(1, 4.0)))[0]
    assert not judge("current-collapse", look(magnet(0, 5.0), magnet(1, 5.01)))[0]


def test_a_steady_ramp_explains_l_di_dt_and_nothing_beyond_it() -> None:
    """V = L dI/dt + R I (Wilson, Superconducting Magnets, 1983)."""
    rate = 0.005
    inductive = L * rate / SCALE
    leads = RIG.magnet.lead_resistance_ohm * 5.0 / SCALE
    told = ramping(rate, 10.0)
    for extra, trips in ((0.0, False), (0.19, False), (0.21, True), (-0.21, True)):
        what = look(
            magnet(99, 5.0 - rate, ramping=1.0),
            magnet(100, 5.0, ramping=1.0, magnet_v=leads + inductive + extra),
            told,
        )
        assert judge("unexplained-voltage", what)[0] is trips


def test_around_a_change_of_the_ramp_any_voltage_up_to_its_own_is_explained() -> None:
    rate = 0.005
    inductive = L * rate / SCALE
    told = Ramp(rate, 10.0, True, changed_s=99.5, heater_changed_s=-1e6)
    for voltage, trips in ((inductive, False), (0.0, False), (inductive + 0.3, True)):
        leads = RIG.magnet.lead_resistance_ohm * 5.0 / SCALE
        what = look(magnet(99, 5.0), magnet(100, 5.0, magnet_v=leads + voltage), told)
        assert judge("unexplained-voltage", what)[0] is trips


def test_a_resting_magnet_with_a_voltage_is_not_explained() -> None:
    what = look(magnet(99, 5.0), magnet(100, 5.0, magnet_v=0.5), Ramp(changed_s=0.0))
    assert judge("unexplained-voltage", what)[0]


def test_the_stage_may_reach_its_largest_and_trips_at_the_trip() -> None:
    for kelvin, trips in ((20.0, False), (29.9, False), (30.0, True), (math.nan, True)):
        what = Look(1.0, 0.0, {"stage": Sight(1.0, {"sample_k": kelvin})})
        assert judge("over-temperature", what)[0] is trips
    cold = Look(1.0, 0.0, {"stage": Sight(1.0, {"sample_k": 1.0})})
    assert judge("over-temperature", cold)[1] == 1.0


def test_the_helium_level_trips_at_its_least() -> None:
    for percent, trips in ((85.0, False), (25.1, False), (25.0, True), (math.nan, True)):
        what = Look(1.0, 0.0, {"helium": Sight(1.0, {"helium_percent": percent})})
        assert judge("level-helium", what)[0] is trips


def test_a_ramp_that_does_not_approach_its_target_is_stalled() -> None:
    told = ramping(0.005, 10.0)
    assert not judge("ramp-stalled", look(magnet(99, 5.0), magnet(100, 5.005), told))[0]
    assert judge("ramp-stalled", look(magnet(99, 5.0), magnet(100, 5.0), told))[0]
    assert judge("ramp-stalled", look(magnet(99, 5.0), magnet(100, 4.995), told))[0]
    soon = look(magnet(29, 5.0), magnet(30, 5.0), told)
    assert not judge("ramp-stalled", soon)[0]
    there = look(magnet(99, 10.0), magnet(100, 10.0), told)
    assert not judge("ramp-stalled", there)[0]


def test_a_value_that_is_not_a_number_is_never_healthy() -> None:
    what = look(magnet(99, 5.0), magnet(100, math.nan), ramping(0.005, 10.0))
    for name in ("field-ceiling", "ramp-ceiling", "current-collapse", "unexplained-voltage"):
        assert judge(name, what)[0], name


def test_a_field_read_at_an_uncertain_moment_is_given_the_longest_time() -> None:
    """A reply that was 0.2 s under way may be of any moment in that time."""
    rate = 0.01
    before = Sight(100.0, magnet(0, 3.0).values, asked_s=99.8)
    newest = Sight(100.9, magnet(0, 3.0 + 1.0 * rate).values, asked_s=100.9)
    assert not judge("ramp-ceiling", look(before, newest))[0]
    prompt = Sight(100.0, before.values, asked_s=100.0)
    faster = Sight(100.9, magnet(0, 3.0 + 1.2 * rate).values, asked_s=100.9)
    assert judge("ramp-ceiling", look(prompt, faster))[0]
