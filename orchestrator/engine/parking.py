"""Getting ready at the start of a night, and parking at its end."""

import contextlib
import math

from orchestrator.engine.ramping import follow
from orchestrator.engine.work import Interrupted, Work
from orchestrator.interlocks.conditions import Response
from orchestrator.interlocks.gate import Refused, Trip, Unanswered
from orchestrator.planning.forecast import SWITCH_MARGIN, plan_legs
from orchestrator.planning.period import travel_ceilings

_AT_REST_T = 1e-3
_PATIENCE_S = 1800.0  # how long parking is tried again when something does not answer
_PAUSE_S = 30.0


async def make_ready(work: Work) -> None:
    """Hold the magnet, set up the lock-ins, warm the switch, switch the stage's heater on."""
    work.sampler.step = "ready"
    work.event("step", "ready", phase="started", type="hold")
    await work.next_reading()
    await work.gate.hold()
    for lock_in in work.rig.lock_ins:
        await work.gate.set_up_lock_in(lock_in.name)
    await work.gate.setpoint_ramp(work.rig.stage.ramp_max_k_per_s)
    await work.gate.heater(True)
    if work.rig.magnet.switch:
        await work.gate.switch_heater(True)
        await work.wait(SWITCH_MARGIN * work.rig.magnet.switch.warm_s)
    work.event("step", "ready", phase="finished", type="hold", outcome="done")


async def park(work: Work) -> str:
    """Bring the rig to rest: ramp to zero within the ceilings, heaters off, leads at zero.

    After a quench nothing is ramped: heaters go off and the supply is left to discharge. What
    cannot be done is recorded, the rest is done all the same, and for half an hour what could not
    be done is tried again, since a network that was away may come back. A persistent switch is
    closed only on a magnet at zero, or after a quench.

    Returns
    -------
    str
        ``"parked"``, or what is not at rest, for the person who is called.
    """
    work.parking = True
    work.sampler.step = "park"
    work.event("step", "park", phase="started", type="park")
    last_try_s = work.clock() + _PATIENCE_S
    problems = await _come_to_rest(work)
    while problems and not _quenched(work) and work.clock() < last_try_s:
        work.event("warning", "park-again", "; ".join(problems), "high")
        with contextlib.suppress(Interrupted):  # a quench meanwhile
            await work.wait(_PAUSE_S)
        problems = await _come_to_rest(work)
    outcome = "parked" if not problems else "; ".join(problems)
    severity = "info" if not problems else "high"
    work.event("step", "park", outcome, severity, phase="finished", type="park", outcome=outcome)
    return outcome


async def _come_to_rest(work: Work) -> list[str]:
    """Do all that parking is; what could not be done, in words."""
    problems: list[str] = []
    try:
        await work.gate.heater(False)
    except (Refused, Unanswered) as error:
        problems.append(str(error))
    try:
        await _ramp_to_rest(work)
    except (Refused, Unanswered, Interrupted) as error:
        problems.append(f"the magnet was not ramped to zero: {error}")
        if not _quenched(work):
            return problems
    return problems + await _let_the_switch_cool(work)


def _quenched(work: Work) -> Trip | None:
    return next((one for one in work.gate.trips if one.response == Response.DISCHARGE), None)


async def _ramp_to_rest(work: Work) -> None:
    if quench := _quenched(work):
        raise Interrupted(quench)
    if work.gate.ramp.ramping:
        await work.gate.hold()
    reading = await work.next_reading()
    field_t = reading.values["field_t"]
    if math.isnan(field_t):
        raise Refused("the field cannot be read")
    if abs(field_t) > _AT_REST_T:
        legs = plan_legs(work.rig, travel_ceilings(work.rig), field_t, 0.0)
        await follow(work, legs)


async def _let_the_switch_cool(work: Work) -> list[str]:
    switch = work.rig.magnet.switch
    if switch is None:
        return []
    try:
        await work.gate.switch_heater(False)
        await work.wait(switch.cool_s)
    except (Refused, Unanswered) as error:
        return [str(error)]
    except Interrupted:
        return []
    return []
