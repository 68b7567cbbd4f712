"""The interlocks: pure functions of what was read, each with a margin and a verdict.

A condition sees only the `Look` that it is given. What is missing, stale or not a number is a
fault, never healthy: the age of every value is judged by `stale`, and the other conditions judge
the newest value that there is. See README.md beside this file for the table.
"""

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from enum import IntEnum

from orchestrator.config.rig import Gauge, Magnet, Rig, Stage
from orchestrator.planning.ceilings import READS_HIGH, safety


class Response(IntEnum):
    """What answers a trip, in order of severity."""

    REFUSE = 1
    SLOW = 2
    HOLD = 3
    PARK = 4
    DISCHARGE = 5


@dataclass(frozen=True, slots=True)
class Sight:
    """The newest values of one instrument: when they were asked for, and when they came.

    What they tell was so at some moment in between.
    """

    taken_s: float
    values: Mapping[str, float]
    asked_s: float = math.nan

    @property
    def earliest_s(self) -> float:
        """The earliest moment of which the values may tell."""
        return self.taken_s if math.isnan(self.asked_s) else self.asked_s


@dataclass(frozen=True, slots=True)
class Ramp:
    """What the supply was last told, as it read back."""

    rate_t_per_s: float = math.nan
    target_t: float = math.nan
    ramping: bool = False
    changed_s: float = -math.inf
    heater_changed_s: float = -math.inf


@dataclass(frozen=True)
class Look:
    """All that a condition may know.

    Attributes
    ----------
    now_s : float
        The night's clock.
    started_s : float
        When the watch began; an instrument that never answered is as old as this.
    newest, before : Mapping[str, Sight]
        Per instrument its newest answer and the one before; absent if there was none.
    ramp : Ramp
        What the supply was last told.
    """

    now_s: float
    started_s: float
    newest: Mapping[str, Sight]
    before: Mapping[str, Sight] = field(default_factory=dict)
    ramp: Ramp = Ramp()


@dataclass(frozen=True, slots=True)
class Verdict:
    """How far from the trip (1 at rest, 0 at the trip), and whether it has come to that."""

    margin: float
    tripped: bool
    text: str


@dataclass(frozen=True)
class Condition:
    """One interlock.

    Attributes
    ----------
    name : str
        By which a person acknowledges the trip.
    response : Response
        What answers it.
    judge : Callable[[Look], Verdict]
        Pure.
    clears : str
        When a person may acknowledge it, in words.
    """

    name: str
    response: Response
    judge: Callable[[Look], Verdict]
    clears: str


_NOTHING_YET = Verdict(1.0, False, "not read yet")


def _verdict(margin: float, text: str) -> Verdict:
    """A margin of 0 or less, or one that is not a number, is a trip."""
    healthy = margin > 0
    return Verdict(min(1.0, max(0.0, margin)) if healthy else 0.0, not healthy, text)


def stale(instrument: str, stale_after_s: float) -> Condition:
    """No answer of an instrument for longer than the rig allows."""

    def judge(look: Look) -> Verdict:
        sight = look.newest.get(instrument)
        age = look.now_s - (look.started_s if sight is None else sight.taken_s)
        text = f"{instrument} last answered {age:.1f} s ago (allowed {stale_after_s:g} s)"
        return _verdict(1 - age / stale_after_s, text)

    return Condition(
        f"stale-{instrument}", Response.PARK, judge, f"{instrument} answers again, at its interval"
    )


def field_ceiling(magnet: Magnet) -> Condition:
    """The field beyond the magnet's largest, and what a supply there may read more."""
    most = magnet.field_max_t * (1 + READS_HIGH)

    def judge(look: Look) -> Verdict:
        if (sight := look.newest.get("magnet")) is None:
            return _NOTHING_YET
        size = abs(sight.values["field_t"])
        return _verdict((most - size) / most + 1e-12, f"field {size:.4f} T (allowed {most:.4f} T)")

    return Condition("field-ceiling", Response.PARK, judge, "the field is below the limit")


def ramp_ceiling(magnet: Magnet) -> Condition:
    """The field moving faster than the ceiling over the stretch that it has passed.

    A tenth more, and the supply's resolution of the field over the time between two answers, are
    allowed for.
    """
    ceilings = safety(magnet)

    def judge(look: Look) -> Verdict:
        moved = _moved(look)
        if moved is None:
            return _NOTHING_YET
        _, longest, before, after = moved
        rate = abs(after - before) / longest
        allowed = 1.1 * ceilings.over(before, after)[0] + 1e-4 / longest
        text = f"field moved at {60 * rate:.4f} T/min (allowed {60 * allowed:.4f} T/min)"
        return _verdict(1 - rate / allowed, text)

    return Condition(
        "ramp-ceiling", Response.HOLD, judge, "the field rests, and the cause is known"
    )


def _moved(look: Look) -> tuple[float, float, float, float] | None:
    """Shortest and longest time between the magnet's two newest answers, and the field at both."""
    newest, before = look.newest.get("magnet"), look.before.get("magnet")
    if newest is None or before is None or newest.taken_s <= before.taken_s:
        return None
    return (
        newest.earliest_s - before.taken_s,
        newest.taken_s - before.earliest_s,
        before.values["field_t"],
        newest.values["field_t"],
    )


def quench_flag() -> Condition:
    """The supply itself says that the magnet has quenched."""

    def judge(look: Look) -> Verdict:
        if (sight := look.newest.get("magnet")) is None:
            return _NOTHING_YET
        quenched = sight.values["quench"] != 0
        text = "the supply reports a quench" if quenched else "no quench reported"
        return Verdict(0.0 if quenched else 1.0, quenched, text)

    return Condition("quench-flag", Response.DISCHARGE, judge, _QUENCH_CLEARS)


_QUENCH_CLEARS = "authorised persons have found the magnet cold, filled and whole"


def current_collapse(magnet: Magnet) -> Condition:
    """The current's size falling faster than any ramp of this rig could make it."""
    fastest = max(zone.rate_t_per_s for zone in magnet.ramp_ceiling)

    def judge(look: Look) -> Verdict:
        moved = _moved(look)
        if moved is None:
            return _NOTHING_YET
        seconds = moved[1]
        scale = magnet.coil_constant_t_per_a
        before = abs(look.before["magnet"].values["current_a"])
        after = abs(look.newest["magnet"].values["current_a"])
        allowed = 2 * (fastest / scale) * seconds + 1e-3 * magnet.field_max_t / scale
        fell = before - after
        text = f"current fell by {max(fell, 0):.3f} A in {seconds:.2f} s (allowed {allowed:.3f} A)"
        return _verdict(1 - max(fell, 0.0) / allowed, text)

    return Condition("current-collapse", Response.DISCHARGE, judge, _QUENCH_CLEARS)


def unexplained_voltage(magnet: Magnet, interval_s: float) -> Condition:
    """A terminal voltage that L dI/dt and the leads do not explain.

    While the ramp is as it was for some readings, dI/dt is that of the two newest currents, with
    the uncertainty of the moments at which they were so.
    Around a change of the ramp or of the switch the voltage may belong to any rate between rest
    and the one that was told, and the whole range counts as explained.
    """
    allowed = magnet.unexplained_voltage_max_v
    scale = magnet.coil_constant_t_per_a

    def judge(look: Look) -> Verdict:
        moved = _moved(look)
        if moved is None:
            return _NOTHING_YET
        shortest, longest, _, _ = moved
        newest, before = look.newest["magnet"].values, look.before["magnet"].values
        change = newest["current_a"] - before["current_a"]
        leads = magnet.lead_resistance_ohm * newest["current_a"]
        slowest = magnet.inductance_h * change / longest
        if _ramp_is_steady(look, magnet, interval_s) and shortest > 0.5 * longest:
            fastest = magnet.inductance_h * change / shortest
            low, high = min(slowest, fastest), max(slowest, fastest)
        else:
            told = look.ramp.rate_t_per_s / scale * magnet.inductance_h
            reach = max(abs(slowest), 0.0 if math.isnan(told) else told)
            low, high = -reach, reach
        voltage = newest["magnet_v"] - leads
        beyond = max(low - voltage, voltage - high, 0.0)
        text = f"terminal voltage unexplained by {beyond:.3f} V (allowed {allowed:g} V)"
        return _verdict(1 - beyond / allowed, text)

    return Condition("unexplained-voltage", Response.DISCHARGE, judge, _QUENCH_CLEARS)


def _ramp_is_steady(look: Look, magnet: Magnet, interval_s: float) -> bool:
    newest, before = look.newest["magnet"].values, look.before["magnet"].values
    quiet_s = look.now_s - look.ramp.changed_s
    switch_s = look.now_s - look.ramp.heater_changed_s
    warm_s = magnet.switch.warm_s if magnet.switch else 0.0
    switch_open = magnet.switch is None or (newest["switch_heater"] != 0 and switch_s > 2 * warm_s)
    return (
        quiet_s > 3 * interval_s
        and newest["ramping"] == before["ramping"]
        and not _near_target(look)
        and switch_open
    )


def _near_target(look: Look) -> bool:
    """Whether the supply has reached its target within the last answers, or is about to."""
    if not look.ramp.ramping or math.isnan(look.ramp.target_t):
        return False
    newest = look.newest["magnet"]
    seconds = newest.taken_s - look.before["magnet"].taken_s
    left = abs(newest.values["field_t"] - look.ramp.target_t)
    return left <= 3 * look.ramp.rate_t_per_s * seconds


def over_temperature(stage: Stage) -> Condition:
    """The stage above the temperature at which the rig must be let alone."""
    most, usual = stage.temperature_trip_k, stage.temperature_max_k

    def judge(look: Look) -> Verdict:
        if (sight := look.newest.get("stage")) is None:
            return _NOTHING_YET
        kelvin = sight.values["sample_k"]
        text = f"stage at {kelvin:.3f} K (allowed {most:g} K)"
        return _verdict((most - kelvin) / (most - usual), text)

    return Condition(
        "over-temperature", Response.PARK, judge, f"the stage is below {most:g} K, its heater off"
    )


def helium_level(gauge: Gauge) -> Condition:
    """The level below the one at which the night must end."""
    least = gauge.least_percent

    def judge(look: Look) -> Verdict:
        if (sight := look.newest.get(gauge.name)) is None:
            return _NOTHING_YET
        level = sight.values[f"{gauge.name}_percent"]
        text = f"{gauge.name} at {level:.1f} % (allowed {least:g} % or more)"
        return _verdict((level - least) / max(100.0 - least, 1e-9), text)

    return Condition(f"level-{gauge.name}", Response.PARK, judge, "the level is above its least")


def stalled(interval_s: float, patience_s: float = 60.0) -> Condition:
    """Told to ramp, and not moving towards the target: is it really approaching?"""

    def judge(look: Look) -> Verdict:
        moved = _moved(look)
        since = look.now_s - look.ramp.changed_s
        if moved is None or not look.ramp.ramping or since < patience_s:
            return Verdict(1.0, False, "not ramping")
        seconds, _, before, after = moved
        left = abs(look.ramp.target_t - after)
        step = look.ramp.rate_t_per_s * seconds
        if left <= max(2 * step, 1e-3):
            return Verdict(1.0, False, "at the target")
        part = (abs(look.ramp.target_t - before) - left) / step
        text = f"field approaches its target at {100 * part:.0f} % of the rate told (least 20 %)"
        return _verdict((part - 0.2) / 0.8, text)

    return Condition("ramp-stalled", Response.HOLD, judge, "the supply ramps as it is told")


def conditions_of(rig: Rig) -> tuple[Condition, ...]:
    """Every interlock of a rig, the most severe first."""
    interval_s, stale_s = rig.sampling.interval_s, rig.sampling.stale_after_s
    names = [one.name for one in rig.lock_ins] + [one.name for one in rig.gauges]
    instruments = ["magnet", "stage", *names]
    every = [
        quench_flag(),
        current_collapse(rig.magnet),
        unexplained_voltage(rig.magnet, interval_s),
        field_ceiling(rig.magnet),
        over_temperature(rig.stage),
        *(helium_level(gauge) for gauge in rig.gauges),
        *(stale(instrument, stale_s) for instrument in instruments),
        ramp_ceiling(rig.magnet),
        stalled(interval_s),
    ]
    return tuple(sorted(every, key=lambda one: -one.response))
