"""The forecast: what a night will take and yield, computed without any instrument."""

import math
from dataclasses import dataclass, field

from orchestrator.config.rig import Rig
from orchestrator.config.sequence import Sequence
from orchestrator.planning.belief import Belief
from orchestrator.planning.ceilings import Ceilings
from orchestrator.planning.expansion import PlannedSettle, PlannedSweep, expand
from orchestrator.planning.period import lowest_visible_t, sweep_ceilings, travel_ceilings
from orchestrator.planning.staircase import Leg, PlanError, duration_s, staircase

SWITCH_MARGIN = 1.5  # the switch is given this many times its warm-up
_RESPONSES_TO_SETTLE = 5.0
_FILTER_PAUSE = 8.0  # filter times before and after a sweep


@dataclass(frozen=True)
class StepForecast:
    """One step: when it starts, how long it takes, and what limits its rate.

    ``binding`` is the share of the time for which each ceiling binds; ``samples_per_period_min``
    is that of the shortest period predicted, None for a step that measures no oscillation.
    """

    name: str
    type: str
    start_s: float
    duration_s: float
    samples: int
    samples_per_period_min: float | None = None
    binding: dict[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Forecast:
    """The whole night, beside one with each sweep at one constant rate."""

    duration_s: float
    constant_rate_duration_s: float
    steps: tuple[StepForecast, ...]


def plan_legs(rig: Rig, ceilings: Ceilings, from_t: float, to_t: float) -> tuple[Leg, ...]:
    """The staircase with what the rig's supply can take. Raises PlanError."""
    return staircase(
        ceilings,
        from_t,
        to_t,
        legs_max=rig.magnet.legs_max,
        rate_resolution_t_per_s=rig.magnet.rate_resolution_t_per_s,
    )


class _Count:
    """Adds steps up."""

    def __init__(self, rig: Rig, belief: Belief) -> None:
        self.rig, self.belief = rig, belief
        self.steps: list[StepForecast] = []
        self.now_s = 0.0
        self.constant_s = 0.0
        self.field_t = 0.0
        self.kelvin = rig.stage.temperature_min_k

    def add(
        self, name: str, kind: str, seconds: float, constant_s: float | None = None, **more: object
    ) -> None:
        samples = int(seconds / self.rig.sampling.interval_s)
        self.steps.append(
            StepForecast(name, kind, self.now_s, seconds, samples, **more)  # type: ignore[arg-type]
        )
        self.now_s += seconds
        self.constant_s += seconds if constant_s is None else constant_s

    def settle(self, step: PlannedSettle) -> None:
        stage = self.rig.stage
        seconds = abs(step.temperature_k - self.kelvin) / stage.ramp_max_k_per_s
        seconds += _RESPONSES_TO_SETTLE * stage.response_s + step.window_s
        self.kelvin = step.temperature_k
        self.add(step.name, "settle", min(seconds, step.timeout_s))

    def travel(self, name: str, to_t: float) -> None:
        legs = plan_legs(self.rig, travel_ceilings(self.rig), self.field_t, to_t)
        self.field_t = to_t
        if legs:
            self.add(name, "approach", duration_s(legs), binding=_shares(legs))

    def sweep(self, step: PlannedSweep) -> None:
        self.travel(f"{step.name}-approach", step.from_t)
        ceilings = sweep_ceilings(self.rig, step.sweep, self.belief, step.temperature_k)
        try:
            legs = plan_legs(self.rig, ceilings, step.from_t, step.to_t)
        except PlanError as error:
            raise PlanError(f"{step.name}: {error}") from None
        filter_s = max(one.time_constant_s * one.filter_poles for one in self.rig.lock_ins)
        pause_s = _FILTER_PAUSE * filter_s
        slowest = min(leg.rate_t_per_s for leg in legs)
        self.field_t = step.to_t
        self.add(
            step.name,
            "field-sweep",
            duration_s(legs) + pause_s,
            constant_s=abs(step.to_t - step.from_t) / slowest + pause_s,
            samples_per_period_min=_finite(
                _least_samples(legs, self.belief, self.rig, step.temperature_k)
            ),
            binding=_shares(legs),
        )


def forecast(
    rig: Rig, sequence: Sequence, *, belief: Belief | None = None, start_field_t: float = 0.0
) -> Forecast:
    """What a night will take.

    Parameters
    ----------
    rig, sequence : Rig, Sequence
        As their files say.
    belief : Belief, optional
        What is held of the sample; the sequence's prior if left out.
    start_field_t : float
        Field at the start, T.

    Raises
    ------
    PlanError
        A sweep that cannot be made; the message says which numbers clash.
    """
    count = _Count(rig, belief or Belief.from_prior(sequence.prior))
    count.field_t = start_field_t
    switch = rig.magnet.switch
    count.add("ready", "hold", SWITCH_MARGIN * switch.warm_s if switch else 0.0)
    for step in expand(sequence, rig, start_field_t=start_field_t):
        if isinstance(step, PlannedSettle):
            count.settle(step)
        else:
            count.sweep(step)
    legs = plan_legs(rig, travel_ceilings(rig), count.field_t, 0.0)
    parking_s = duration_s(legs) + (switch.cool_s if switch else 0.0)
    count.add("park", "park", parking_s, binding=_shares(legs))
    return Forecast(count.now_s, count.constant_s, tuple(count.steps))


def _finite(value: float) -> float | None:
    """None where no orbit is seen anywhere in a sweep."""
    return value if math.isfinite(value) else None


def _shares(legs: tuple[Leg, ...]) -> dict[str, float]:
    total = duration_s(legs)
    shares: dict[str, float] = {}
    for leg in legs:
        shares[leg.binding] = shares.get(leg.binding, 0.0) + leg.duration_s / total
    return shares


def _least_samples(
    legs: tuple[Leg, ...], belief: Belief, rig: Rig, temperature_k: float | None
) -> float:
    """Least number of samples in a period B^2/F over the legs, of every orbit where it is seen."""
    interval_s = rig.sampling.interval_s
    least = math.inf
    for orbit in belief.orbits:
        seen_from_t = lowest_visible_t(orbit, temperature_k)
        for leg in legs:
            low, high = sorted((abs(leg.from_t), abs(leg.to_t)))
            if high > seen_from_t:
                period_t = max(low, seen_from_t) ** 2 / orbit.frequency_t
                least = min(least, period_t / (leg.rate_t_per_s * interval_s))
    return least
