"""Legs: below the ceiling everywhere, each command safe as the last, in the least time."""

import itertools
import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from orchestrator.config.sequence import Ladder
from orchestrator.planning.belief import Belief
from orchestrator.planning.ceilings import Ceiling, Ceilings, constant
from orchestrator.planning.forecast import plan_legs
from orchestrator.planning.period import sweep_ceilings, travel_ceilings
from orchestrator.planning.staircase import (
    Leg,
    PlanError,
    commands_between,
    duration_s,
    staircase,
    switch_field_t,
)
from tests.planning.shipped import RIG, sequence

OVERNIGHT = sequence("overnight-ladder.toml")
SWEEP = next(step for step in OVERNIGHT.steps if isinstance(step, Ladder)).sweep
SWEEPING = sweep_ceilings(RIG, SWEEP, Belief.from_prior(OVERNIGHT.prior), 1.0)
TRAVEL = travel_ceilings(RIG)
FIELDS = st.floats(-12, 12).map(lambda value: round(value, 3))
LEAD_S = 2.5 * RIG.sampling.interval_s


def allowed(ceilings: Ceilings, from_t: float, to_t: float) -> float:
    """The least ceiling between two fields, seen at many of them."""
    return float(ceilings.at(np.linspace(from_t, to_t, 400))[0].min())


@pytest.mark.parametrize("ceilings", [TRAVEL, SWEEPING], ids=["travel", "sweep"])
@settings(max_examples=60, deadline=None)
@given(from_t=FIELDS, to_t=FIELDS)
def test_legs_join_the_ends_and_stay_below_the_ceilings(
    ceilings: Ceilings, from_t: float, to_t: float
) -> None:
    assume(abs(from_t - to_t) > 1e-3)
    legs = plan_legs(RIG, ceilings, from_t, to_t)
    assert (legs[0].from_t, legs[-1].to_t) == (from_t, to_t)
    assert all(before.to_t == after.from_t for before, after in pairwise(legs))
    assert len(legs) <= RIG.magnet.legs_max
    for leg in legs:
        # The rate is allowed not only on the leg, but on the whole way to its target.
        assert leg.rate_t_per_s <= allowed(ceilings, leg.from_t, leg.target_t) * (1 + 1e-6)
        steps = leg.rate_t_per_s / RIG.magnet.rate_resolution_t_per_s
        assert steps == pytest.approx(round(steps), abs=1e-6)


@settings(max_examples=60, deadline=None)
@given(from_t=FIELDS, to_t=FIELDS)
def test_every_command_is_safe_as_the_last_one(from_t: float, to_t: float) -> None:
    """After each command in turn, the supply left alone stays below the safety ceilings."""
    assume(abs(from_t - to_t) > 1e-3)
    legs = plan_legs(RIG, SWEEPING, from_t, to_t)
    here_t, rate, target_t = from_t, math.nan, from_t
    previous: Leg | None = None
    for at, leg in enumerate(legs):
        for operation, value in commands_between(previous, leg):
            rate, target_t = (value, target_t) if operation == "rate" else (rate, value)
            assert rate <= allowed(SWEEPING, here_t, target_t) * (1 + 1e-6)
        following = legs[at + 1] if at + 1 < len(legs) else None
        here_t = leg.to_t if following is None else switch_field_t(leg, following, LEAD_S)
        previous = leg


def test_a_slower_leg_is_told_before_its_stretch_and_a_faster_one_after_it() -> None:
    legs = plan_legs(RIG, TRAVEL, 0.0, 12.0)
    for leg, following in pairwise(legs):
        assert following.rate_t_per_s < leg.rate_t_per_s
        lead_t = leg.to_t - switch_field_t(leg, following, LEAD_S)
        assert lead_t == pytest.approx(LEAD_S * leg.rate_t_per_s)
        assert [one for one, _ in commands_between(leg, following)] == ["rate", "target"]
    for leg, following in pairwise(plan_legs(RIG, TRAVEL, 12.0, 0.0)):
        assert following.rate_t_per_s > leg.rate_t_per_s
        assert switch_field_t(leg, following, LEAD_S) == leg.to_t


def test_the_supply_need_not_stop_between_legs() -> None:
    """A leg's target lies beyond its end wherever its rate is allowed there."""
    for legs in (plan_legs(RIG, SWEEPING, 12.0, 3.0), plan_legs(RIG, SWEEPING, 3.0, 12.0)):
        for leg, following in pairwise(legs):
            if following.rate_t_per_s > leg.rate_t_per_s:
                assert abs(leg.target_t - leg.from_t) > abs(leg.to_t - leg.from_t)


def test_the_staircase_takes_little_longer_than_the_profile_that_it_follows() -> None:
    """Against the integral of dB over the ceiling, which no staircase can beat."""
    fields = np.linspace(3.0, 12.0, 20001)
    least_s = np.trapezoid(1 / SWEEPING.at(fields)[0], fields)
    for legs_max, excess in ((10, 0.09), (24, 0.035)):
        legs = staircase(
            SWEEPING,
            3.0,
            12.0,
            legs_max=legs_max,
            rate_resolution_t_per_s=RIG.magnet.rate_resolution_t_per_s,
        )
        assert least_s <= duration_s(legs) <= (1 + excess) * least_s


@settings(max_examples=30, deadline=None)
@given(st.lists(st.integers(1, 9), min_size=2, max_size=7), st.integers(1, 4))
def test_no_other_choice_of_legs_is_faster(rates: list[int], legs_max: int) -> None:
    """A brute-force search over all breakpoints at the edges of a profile made of steps."""
    edges = np.arange(1, len(rates) + 1, dtype=float)
    table = np.array([*rates, rates[-1]], dtype=float)
    steps = Ceiling(
        "steps", lambda size: table[np.searchsorted(edges, size, side="left")], tuple(edges)
    )
    legs = staircase(
        Ceilings((steps,)), 0.0, edges[-1], legs_max=legs_max, rate_resolution_t_per_s=1e-3
    )
    count = len(rates)
    best = min(
        sum((end - start) / min(rates[start:end]) for start, end in pairwise((0, *cuts, count)))
        for number in range(min(legs_max, count))
        for cuts in itertools.combinations(range(1, count), number)
    )
    # An edge belongs to the slower side, so a leg above it begins a cell of the grid later.
    cell_t = count / 119
    assert best * (1 - 1e-9) <= duration_s(legs) <= best + count * cell_t / min(rates)


def test_a_rate_that_the_supply_cannot_make_is_told_with_the_numbers_that_clash() -> None:
    with pytest.raises(PlanError, match=r"the sequence allows 0\.0006 T/min.*resolution is 0\.006"):
        staircase(
            Ceilings((constant("sequence", 1e-5),)),
            0.0,
            1.0,
            legs_max=5,
            rate_resolution_t_per_s=1e-4,
        )


def test_no_way_no_legs() -> None:
    assert plan_legs(RIG, TRAVEL, 2.0, 2.0) == ()


def test_through_zero_field_the_fast_middle_is_used() -> None:
    """Two legs gain nothing on a profile that is slow at both ends; three and more do."""
    legs = plan_legs(RIG, TRAVEL, -12.0, 12.0)
    # The magnet table by hand: 3 T at 0.12 T/min, 3 at 0.3 and 6 at 0.6, on both sides.
    assert duration_s(legs) == pytest.approx(2 * 60 * (3 / 0.12 + 3 / 0.3 + 6 / 0.6), rel=0.01)
