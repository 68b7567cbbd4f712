"""A sequence written out step by step, as the engine does it and the forecast counts it."""

from dataclasses import dataclass

from orchestrator.config.rig import Rig
from orchestrator.config.sequence import FieldSweep, Ladder, Sequence, Settle


@dataclass(frozen=True, slots=True)
class PlannedSettle:
    """Go to a temperature and wait until it stays."""

    name: str
    temperature_k: float
    tolerance_k: float
    window_s: float
    timeout_s: float
    on_timeout: str


@dataclass(frozen=True, slots=True)
class PlannedSweep:
    """Sweep the field from one end to the other at a temperature, None if none was set."""

    name: str
    sweep: FieldSweep
    temperature_k: float | None
    from_t: float
    to_t: float


Planned = PlannedSettle | PlannedSweep


def expand(sequence: Sequence, rig: Rig, *, start_field_t: float = 0.0) -> tuple[Planned, ...]:
    """Every step of a night in order; a sweep that starts at the nearer end has its direction.

    Parameters
    ----------
    sequence, rig : Sequence, Rig
        As their files say.
    start_field_t : float
        Field at the start of the night, T.
    """
    planned: list[Planned] = []
    field_t, temperature_k = start_field_t, None
    for step in sequence.steps:
        if isinstance(step, Settle):
            planned.append(_settle(step.name, step, step.temperature_k))
            temperature_k = step.temperature_k
        elif isinstance(step, FieldSweep):
            sweeps = _sweeps(step, step.name, temperature_k, field_t)
            planned += sweeps
            field_t = sweeps[-1].to_t
        else:
            for number, kelvin in enumerate(step.temperatures_k, 1):
                temperature_k = kelvin
                planned.append(_settle(f"{step.name}-{number}-settle", step, kelvin))
                sweeps = _sweeps(step.sweep, f"{step.sweep.name}-{number}", kelvin, field_t)
                planned += sweeps
                field_t = sweeps[-1].to_t
    return tuple(planned)


def _settle(name: str, step: Settle | Ladder, kelvin: float) -> PlannedSettle:
    return PlannedSettle(
        name, kelvin, step.tolerance_k, step.window_s, step.timeout_s, step.on_timeout
    )


def _sweeps(
    sweep: FieldSweep, name: str, kelvin: float | None, field_t: float
) -> list[PlannedSweep]:
    there, back = (sweep.from_t, sweep.to_t), (sweep.to_t, sweep.from_t)
    if sweep.direction == "both":
        return [
            PlannedSweep(f"{name}-there", sweep, kelvin, *there),
            PlannedSweep(f"{name}-back", sweep, kelvin, *back),
        ]
    turned = sweep.direction == "reversed" or (
        sweep.direction == "nearest" and abs(field_t - sweep.to_t) < abs(field_t - sweep.from_t)
    )
    return [PlannedSweep(name, sweep, kelvin, *(back if turned else there))]
