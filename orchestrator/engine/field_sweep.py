"""The step that the night is for: a field sweep that adapts its rate to the 1/B period."""

from typing import Any

from orchestrator.engine.ramping import follow
from orchestrator.engine.work import Work
from orchestrator.planning.expansion import PlannedSweep
from orchestrator.planning.forecast import plan_legs
from orchestrator.planning.period import sweep_ceilings, travel_ceilings
from orchestrator.planning.staircase import Leg, duration_s

_NEAR_T = 1e-3
_REPLAN_LEAST_T = 0.05  # what is left of a sweep is not planned again below this


async def approach(work: Work, name: str, to_t: float) -> None:
    """Go to a field as fast as the travel ceilings allow."""
    reading = await work.next_reading()
    from_t = reading.values["field_t"]
    if abs(from_t - to_t) <= _NEAR_T:
        return
    legs = plan_legs(work.rig, travel_ceilings(work.rig), from_t, to_t)
    work.sampler.step = f"{name}-approach"
    work.event("step", f"{name}-approach", phase="started", type="approach", to_t=to_t)
    await follow(work, legs)
    work.event("step", f"{name}-approach", phase="finished", type="approach", outcome="done")


async def sweep_field(work: Work, planned: PlannedSweep) -> None:
    """Approach the start, sweep along the staircase, plan again where findings have come."""
    await approach(work, planned.name, planned.from_t)
    filter_s = max(one.time_constant_s * one.filter_poles for one in work.rig.lock_ins)
    reading = await work.wait(5 * filter_s + work.rig.sampling.interval_s)
    belief = work.belief

    def legs_from(field_t: float, reason: str) -> tuple[Leg, ...]:
        ceilings = sweep_ceilings(work.rig, planned.sweep, work.belief, planned.temperature_k)
        legs = plan_legs(work.rig, ceilings, field_t, planned.to_t)
        work.event(
            "plan",
            planned.name,
            reason,
            step=planned.name,
            reason=reason,
            legs=[[leg.from_t, leg.to_t, leg.rate_t_per_s, leg.binding] for leg in legs],
            duration_s=duration_s(legs),
            orbits=[
                [one.frequency_t, one.frequency_sd_t, one.mass, one.dingle_k]
                for one in work.belief.orbits
            ],
        )
        return legs

    def replan(field_t: float) -> tuple[Leg, ...] | None:
        nonlocal belief
        if work.belief.same_as(belief) or abs(planned.to_t - field_t) < _REPLAN_LEAST_T:
            return None
        belief = work.belief
        return legs_from(field_t, "a finding has come")

    legs = legs_from(reading.values["field_t"], "before the sweep")
    work.sampler.step = planned.name
    first = work.sampler.number + 1
    about: dict[str, Any] = {
        "type": "field-sweep",
        "from_t": planned.from_t,
        "to_t": planned.to_t,
        "temperature_k": planned.temperature_k,
    }
    work.event("step", planned.name, phase="started", first_reading=first, **about)
    outcome = "interrupted"
    try:
        await follow(work, legs, replan)
        await work.wait(3 * filter_s)
        outcome = "done"
    finally:
        # What a trip cut short is still data: the analysis gets the readings up to there.
        work.event(
            "step",
            planned.name,
            phase="finished",
            outcome=outcome,
            first_reading=first,
            last_reading=work.sampler.number,
            **about,
        )
