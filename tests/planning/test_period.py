"""Rates that follow the period in 1/B, and the filter, and where an orbit stops to matter."""

import math

import numpy as np
import pytest
from scipy import constants

from orchestrator.config.sequence import FieldSweep
from orchestrator.planning.belief import Belief, OrbitBelief
from orchestrator.planning.period import lowest_visible_t, sweep_ceilings
from tests.planning.shipped import RIG, sequence

SWEEP = next(
    step.sweep for step in sequence("overnight-ladder.toml").steps if hasattr(step, "sweep")
)
BELIEF = Belief((OrbitBelief(1000.0, 100.0, 0.4, 0.7),))
ALONE = {"samples per period", "filter loss"}


def rate(field_t: float, sweep: FieldSweep = SWEEP, belief: Belief = BELIEF) -> dict[str, float]:
    """Rates in T/s by ceiling at one field."""
    members = sweep_ceilings(RIG, sweep, belief, 1.0).members
    return {one.name: float(one.rate_t_per_s(np.array([field_t]))[0]) for one in members}


def test_samples_are_equal_in_phase_of_the_highest_frequency_that_is_believed() -> None:
    """The phase is 2 pi F/B (Onsager 1952): N samples a period mean dB/dt = B^2/(F N dt)."""
    highest = 1100.0 * SWEEP.harmonic
    for field_t in (4.0, 8.0, 12.0):
        steps = highest * SWEEP.samples_per_period * RIG.sampling.interval_s
        assert rate(field_t)["samples per period"] == pytest.approx(field_t**2 / steps)
        # By hand, from two neighbouring samples: the phase between them is a period over N.
        step_t = rate(field_t)["samples per period"] * RIG.sampling.interval_s
        turned = highest / (field_t - step_t / 2) - highest / (field_t + step_t / 2)
        assert turned == pytest.approx(1 / SWEEP.samples_per_period, rel=1e-3)


def test_the_filter_loses_no_more_than_was_asked() -> None:
    """|H| of n RC poles at the frequency at which the oscillation is met: linear systems."""
    slowest = max(RIG.lock_ins, key=lambda one: one.time_constant_s * one.filter_poles)
    met_hz = 1100.0 * SWEEP.harmonic * rate(6.0)["filter loss"] / 6.0**2
    passed = abs(1 + 2j * math.pi * met_hz * slowest.time_constant_s) ** -slowest.filter_poles
    assert passed == pytest.approx(1 - SWEEP.filter_loss, rel=1e-6)


def test_an_orbit_stops_to_matter_where_lifshitz_kosevich_has_drowned_it() -> None:
    """R_T R_D = 1e-4 there; written anew from CODATA constants (Shoenberg 1984)."""
    orbit, kelvin = BELIEF.orbits[0], 1.0
    field_t = lowest_visible_t(orbit, kelvin)
    scale = 2 * math.pi**2 * constants.k * constants.m_e / (constants.hbar * constants.e)
    x = scale * orbit.mass * kelvin / field_t
    left = x / math.sinh(x) * math.exp(-scale * orbit.mass * orbit.dingle_k / field_t)
    assert left == pytest.approx(1e-4, rel=0.05)


def test_a_heavy_orbit_does_not_slow_the_sweep_where_it_cannot_be_seen() -> None:
    heavy = OrbitBelief(5000.0, 0.0, 1.0, 1.5)
    both = Belief((*BELIEF.orbits, heavy))
    seen_from_t = lowest_visible_t(heavy, 1.0)
    below, above = 0.98 * seen_from_t, 1.02 * seen_from_t
    for name in ALONE:
        assert rate(below, belief=both)[name] == rate(below)[name]
        assert rate(above, belief=both)[name] < rate(above)[name] / 4


def test_below_every_visible_field_the_rate_is_held_and_not_driven_to_zero() -> None:
    lowest = lowest_visible_t(BELIEF.orbits[0], 1.0)
    for name in ALONE:
        assert rate(0.1 * lowest)[name] == pytest.approx(rate(lowest)[name], rel=1e-9)


def test_a_finding_that_wants_it_slower_slows_it_and_safety_stays() -> None:
    found = BELIEF.with_findings([{"frequency_t": 1150.0, "frequency_sd_t": 5.0}])
    assert rate(8.0, belief=found)["samples per period"] < rate(8.0)["samples per period"]
    for name in ("magnet table", "charge voltage", "eddy heating"):
        assert rate(8.0, belief=found)[name] == rate(8.0)[name]
