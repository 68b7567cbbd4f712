"""Following a staircase: the commands of each leg in their safe order, where they are due."""

from collections.abc import Callable

from orchestrator.engine.work import Work
from orchestrator.planning.staircase import Leg, commands_between, switch_field_t

_ARRIVED_T = 2e-4
_LEAD_READINGS = 2.5

Replan = Callable[[float], tuple[Leg, ...] | None]


async def follow(work: Work, legs: tuple[Leg, ...], replan: Replan | None = None) -> None:
    """Ramp along the legs, and hold at the end of the last.

    Parameters
    ----------
    work : Work
        The night's parts.
    legs : tuple of Leg
        From the present field to where the sweep ends.
    replan : Callable, optional
        Asked at each leg's end with the field in T; returns new legs from there, or None.
    """
    previous: Leg | None = None
    waiting = list(legs)
    while waiting:
        leg = waiting.pop(0)
        for operation, value in commands_between(previous, leg):
            await (work.gate.rate(value) if operation == "rate" else work.gate.target(value))
        following = waiting[0] if waiting else None
        lead_s = _LEAD_READINGS * work.rig.sampling.interval_s
        end_t = leg.to_t if following is None else switch_field_t(leg, following, lead_s)
        field_t = await _reach(work, leg, end_t, last=following is None)
        previous = leg
        if replan and waiting and (legs_now := replan(field_t)):
            waiting = list(legs_now)
    await work.gate.hold()


async def _reach(work: Work, leg: Leg, end_t: float, *, last: bool) -> float:
    """Ramp until the field that is read has reached a leg's end; returns that field.

    A hold that a person has lifted is followed by going on.
    """
    upwards = 1.0 if leg.to_t >= leg.from_t else -1.0
    slack_t = _ARRIVED_T if last else 0.0
    while True:
        if not work.gate.ramp.ramping:
            await work.gate.go()
        reading = await work.next_reading()
        field_t = reading.values["field_t"]
        if "magnet" in reading.taken_s and upwards * (end_t - field_t) <= slack_t:
            return field_t
