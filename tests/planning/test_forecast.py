"""The forecast adds up, and each number in it can be had another way."""

import math
from itertools import pairwise

import pytest
from scipy import constants

from orchestrator.config.sequence import FieldSweep, Ladder
from orchestrator.physics.helium import boiled_litres
from orchestrator.planning.belief import Belief, OrbitBelief
from orchestrator.planning.cautions import DECIDES, cautions
from orchestrator.planning.expansion import PlannedSettle, PlannedSweep, expand
from orchestrator.planning.forecast import PlanError, forecast
from tests.planning.shipped import RIG, sequence

NAMES = ["short-evening.toml", "overnight-ladder.toml"]


@pytest.mark.parametrize("name", NAMES)
def test_steps_follow_each_other_and_add_up(name: str) -> None:
    night = forecast(RIG, sequence(name))
    assert night.steps[0].start_s == 0.0
    for before, after in pairwise(night.steps):
        assert after.start_s == pytest.approx(before.start_s + before.duration_s)
    assert night.duration_s == pytest.approx(sum(one.duration_s for one in night.steps))
    assert (night.steps[0].name, night.steps[-1].name) == ("ready", "park")


@pytest.mark.parametrize("name", NAMES)
def test_shares_of_the_binding_ceilings_make_a_whole(name: str) -> None:
    for one in forecast(RIG, sequence(name)).steps:
        if one.binding:
            assert sum(one.binding.values()) == pytest.approx(1.0)


@pytest.mark.parametrize("name", NAMES)
def test_no_predicted_period_gets_fewer_samples_than_the_sequence_asks_for(name: str) -> None:
    night = sequence(name)
    asked = next(step for step in night.steps if isinstance(step, Ladder)).sweep.samples_per_period
    # What is predicted is the prior's frequency; the plan keeps its spread in hand as well.
    spread = 1 + night.prior.spread
    for one in forecast(RIG, night).steps:
        if one.type == "field-sweep":
            assert one.samples_per_period_min is not None
            assert one.samples_per_period_min >= asked * spread * (1 - 1e-6)


@pytest.mark.parametrize("name", NAMES)
def test_a_night_at_one_rate_takes_longer(name: str) -> None:
    night = forecast(RIG, sequence(name))
    assert night.constant_rate_duration_s > night.duration_s


def test_a_constant_rate_is_the_one_that_the_densest_place_needs() -> None:
    """By hand, for a sweep that the period alone limits: B^2/(F N dt) at its lowest field."""
    night = sequence("overnight-ladder.toml")
    sweep = next(step for step in night.steps if isinstance(step, Ladder)).sweep
    lone = Belief((OrbitBelief(2000.0, 0.0, 0.05, 0.1),))
    changed = sweep.model_copy(update={"from_t": 4.0, "to_t": 8.0, "direction": "as-given"})
    only = night.model_copy(update={"steps": [changed]})
    result = forecast(RIG, only, belief=lone, start_field_t=4.0)
    (swept,) = [one for one in result.steps if one.type == "field-sweep"]
    steps = 2000.0 * sweep.harmonic * sweep.samples_per_period * RIG.sampling.interval_s
    slowest = 4.0**2 / steps
    resolution = RIG.magnet.rate_resolution_t_per_s
    floored = math.floor(slowest / resolution * (1 + 1e-9)) * resolution
    constant_s = result.constant_rate_duration_s - result.duration_s + swept.duration_s
    filter_s = max(one.time_constant_s * one.filter_poles for one in RIG.lock_ins)
    assert constant_s == pytest.approx(4.0 / floored + 8 * filter_s, rel=1e-6)


def test_a_ladder_is_written_out_with_a_settle_before_each_sweep() -> None:
    night = sequence("short-evening.toml")
    ladder = next(step for step in night.steps if isinstance(step, Ladder))
    planned = expand(night, RIG)
    kinds = [type(one) for one in planned]
    assert kinds == [PlannedSettle, PlannedSweep] * len(ladder.temperatures_k)
    settles = [one.temperature_k for one in planned if isinstance(one, PlannedSettle)]
    assert settles == ladder.temperatures_k
    assert len({one.name for one in planned}) == len(planned)


@pytest.mark.parametrize(
    ("direction", "start_t", "ways"),
    [
        ("as-given", 0.0, [(3.0, 9.0), (3.0, 9.0)]),
        ("reversed", 0.0, [(9.0, 3.0), (9.0, 3.0)]),
        ("nearest", 0.0, [(3.0, 9.0), (9.0, 3.0)]),
        ("nearest", 12.0, [(9.0, 3.0), (3.0, 9.0)]),
        ("both", 0.0, [(3.0, 9.0), (9.0, 3.0), (3.0, 9.0), (9.0, 3.0)]),
    ],
)
def test_sweeps_go_the_way_that_the_sequence_says(
    direction: str, start_t: float, ways: list[tuple[float, float]]
) -> None:
    night = sequence("short-evening.toml")
    ladder = next(step for step in night.steps if isinstance(step, Ladder))
    sweep: FieldSweep = ladder.sweep.model_copy(
        update={"from_t": 3.0, "to_t": 9.0, "direction": direction}
    )
    two = ladder.model_copy(update={"sweep": sweep, "temperatures_k": [1.0, 2.0]})
    planned = expand(night.model_copy(update={"steps": [two]}), RIG, start_field_t=start_t)
    assert [(one.from_t, one.to_t) for one in planned if isinstance(one, PlannedSweep)] == ways


def test_a_sweep_that_cannot_be_made_is_named() -> None:
    night = sequence("overnight-ladder.toml")
    absurd = Belief((OrbitBelief(1e7, 0.0, 0.01, 0.01),))
    with pytest.raises(PlanError, match=r"sweep-1: between .* the samples per period allows"):
        forecast(RIG, night, belief=absurd)


def test_cautions_give_the_rigs_own_energy_and_each_leaves_the_decision_to_the_facility() -> None:
    """E = L I^2/2 (Wilson 1983); 2.6 kJ a litre: latent heat of helium, CoolProp at 101325 Pa."""
    texts = cautions(RIG)
    assert all(text.endswith(DECIDES) for text in texts)
    current_a = RIG.magnet.field_max_t / RIG.magnet.coil_constant_t_per_a
    energy_kj = RIG.magnet.inductance_h * current_a**2 / 2000
    quench = next(text for text in texts if "stores" in text)
    assert f"stores {energy_kj:.0f} kJ" in quench
    litres = energy_kj / (124.67 * 20.56 / 1000)
    assert f"{litres:.0f} litres" in quench
    assert boiled_litres(1000 * energy_kj) == pytest.approx(litres, rel=1e-3)
    # As an ideal gas at 20 C a litre of liquid fills 0.75 m3: Avogadro, 4.0026 g/mol.
    m3 = litres * 0.12467 / 0.0040026 * constants.R * 293.15 / 101325
    assert f"{m3:.0f} m³" in quench
    for danger in ("oxygen", "pacemakers", "current leads", "Unattended", "quench protection"):
        assert any(danger in text for text in texts)
