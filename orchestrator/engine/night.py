"""A night from its first reading to the parked rig."""

import asyncio
import contextlib
import traceback
from collections.abc import AsyncIterator, Sequence
from dataclasses import dataclass
from typing import Any

from orchestrator.engine.field_sweep import sweep_field
from orchestrator.engine.parking import make_ready, park
from orchestrator.engine.settling import settle
from orchestrator.engine.work import Interrupted, Work
from orchestrator.interlocks.conditions import Response
from orchestrator.interlocks.gate import Refused, Unanswered
from orchestrator.ledger.schema import LedgerError
from orchestrator.planning.expansion import PlannedSettle, PlannedSweep
from orchestrator.planning.forecast import Forecast

PlannedStep = PlannedSettle | PlannedSweep


@dataclass(frozen=True, slots=True)
class StepDone:
    """What became of a step."""

    name: str
    outcome: str
    duration_s: float


@dataclass(frozen=True, slots=True)
class NightDone:
    """What became of a night: ``"done"``, or the name of what ended it."""

    outcome: str
    parked: str
    duration_s: float
    steps: tuple[StepDone, ...]


async def run_night(work: Work, steps: Sequence[PlannedStep], forecast: Forecast) -> NightDone:
    """Do the steps of a night, then park, whatever happened."""
    started_s = work.clock()
    work.event("night", "started", **_about(work, forecast))
    done: list[StepDone] = []
    async with _sampling(work):
        outcome = await _do_steps(work, steps, done)
    parking_s = work.clock()
    async with _sampling(work):
        parked = await park(work)
    done.append(StepDone("park", parked, work.clock() - parking_s))
    await work.sampler.close()
    work.event("night", "ended", outcome, outcome=outcome, parked=parked)
    return NightDone(outcome, parked, work.clock() - started_s, tuple(done))


@contextlib.asynccontextmanager
async def _sampling(work: Work) -> AsyncIterator[None]:
    """Readings while inside. A sampler that failed in the steps is started anew for parking."""
    sampling = asyncio.ensure_future(work.sampler.run())
    try:
        yield
    finally:
        sampling.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await sampling


async def _do_steps(work: Work, steps: Sequence[PlannedStep], done: list[StepDone]) -> str:
    """Do the steps until one is interrupted; returns the night's outcome."""
    name, began_s = "ready", work.clock()
    try:
        await make_ready(work)
        done.append(StepDone(name, "done", work.clock() - began_s))
        for step in steps:
            name, began_s = step.name, work.clock()
            work.ledger.checkpoint({"step": name})
            if isinstance(step, PlannedSettle):
                await settle(work, step)
            else:
                await sweep_field(work, step)
            done.append(StepDone(name, "done", work.clock() - began_s))
    except Interrupted as interruption:
        outcome = interruption.trip.name
    except Unanswered as error:
        outcome = work.gate.trips[0].name
        work.event("warning", name, str(error))
    except Refused as refusal:
        # The plan asked for what the gate does not allow: a fault of this program, not of the rig.
        work.gate.latch("refused-command", Response.PARK, str(refusal))
        outcome = "refused-command"
    except LedgerError as error:
        await work.sentinel.fault("ledger-failed", str(error))
        outcome = "ledger-failed"
    except Exception as error:
        # A fault of this program must not leave a magnet at field; the record says what it was.
        lines = traceback.format_exception(error)
        work.event("warning", "program-fault", "".join(lines)[-4000:], "high")
        await work.sentinel.fault("program-fault", f"{type(error).__name__}: {error}")
        outcome = "program-fault"
    else:
        return "done"
    done.append(StepDone(name, outcome, work.clock() - began_s))
    work.event("step", name, outcome, phase="finished", type="interrupted", outcome=outcome)
    return outcome


def _about(work: Work, forecast: Forecast) -> dict[str, Any]:
    return {
        "lock_ins": [
            {
                "name": one.name,
                "measures": one.measures,
                "excitation_a": one.excitation_a,
                "time_constant_s": one.time_constant_s,
                "poles": one.filter_poles,
            }
            for one in work.rig.lock_ins
        ],
        "interval_s": work.rig.sampling.interval_s,
        "forecast_s": forecast.duration_s,
        "steps": [
            {"name": one.name, "start_s": one.start_s, "duration_s": one.duration_s}
            for one in forecast.steps
        ],
    }
