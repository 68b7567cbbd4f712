"""The step that brings the stage to a temperature and waits until it stays there."""

from typing import Any

from orchestrator.engine.work import Interrupted, Work
from orchestrator.interlocks.conditions import Response
from orchestrator.planning.expansion import PlannedSettle


async def settle(work: Work, planned: PlannedSettle) -> None:
    """Set the set-point; wait until the temperature has stayed in tolerance for the window.

    Raises
    ------
    Interrupted
        It took longer than the sequence allows, and the sequence says to park.
    """
    work.sampler.step = planned.name
    about: dict[str, Any] = {"type": "settle", "temperature_k": planned.temperature_k}
    work.event("step", planned.name, phase="started", **about)
    await work.gate.setpoint(planned.temperature_k)
    started_s = work.clock()
    inside_since_s: float | None = None
    outcome = "done"
    while True:
        reading = await work.next_reading()
        taken_s = reading.taken_s.get("stage")
        if taken_s is not None:
            away = abs(reading.values["sample_k"] - planned.temperature_k)
            if away > planned.tolerance_k:
                inside_since_s = None
            elif inside_since_s is None:
                inside_since_s = taken_s
            elif taken_s - inside_since_s >= planned.window_s:
                break
        if work.clock() - started_s > planned.timeout_s:
            outcome = "timed out"
            break
    work.event("step", planned.name, phase="finished", outcome=outcome, **about)
    if outcome == "done":
        return
    text = f"{planned.name}: not within {planned.tolerance_k:g} K after {planned.timeout_s:g} s"
    work.event("warning", planned.name, text)
    if planned.on_timeout == "park":
        trip = work.gate.latch("settle-timeout", Response.PARK, text)
        raise Interrupted(trip or work.gate.trips[0])
