"""An independent look at what reached the instruments: was every command safe as the last one?

It knows nothing of planning, gate or sentinel: from the ledger it takes the commands, the readings
around them and the text of the rig file, and does its own arithmetic.
"""

import math
import tomllib
from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import dataclass

from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.records import CommandRecord, EventRecord
from orchestrator.readings import Reading
from orchestrator.units import to_si

_ROUNDING = 2e-6
_READS_HIGH = 1e-3  # a supply at its largest field may read so much more (common practice)


@dataclass(frozen=True, slots=True)
class Limits:
    """The limits of the rig file, in SI.

    ``zones`` are (up to field in T, rate in T/s) by rising field.
    """

    field_max_t: float
    zones: tuple[tuple[float, float], ...]
    coil_constant_t_per_a: float
    inductance_h: float
    lead_resistance_ohm: float
    charge_voltage_max_v: float
    temperature_max_k: float

    @classmethod
    def of(cls, rig_text: str) -> "Limits":
        """The limits in the text of a rig file."""
        data = tomllib.loads(rig_text)
        magnet = data["magnet"]
        return cls(
            to_si(magnet["field_max"], "T"),
            tuple(
                (to_si(zone["to"], "T"), to_si(zone["rate"], "T/s"))
                for zone in magnet["ramp_ceiling"]
            ),
            to_si(magnet["coil_constant"], "T/A"),
            to_si(magnet["inductance"], "H"),
            to_si(magnet["lead_resistance"], "ohm"),
            to_si(magnet["charge_voltage_max"], "V"),
            to_si(data["stage"]["temperature_max"], "K"),
        )

    def rate_allowed(self, from_t: float, to_t: float) -> float:
        """The rate in T/s that is allowed everywhere between two fields, of either sign."""
        far = max(abs(from_t), abs(to_t))
        near = 0.0 if from_t * to_t < 0 else min(abs(from_t), abs(to_t))
        allowed = math.inf
        below = 0.0
        for up_to, rate in self.zones:
            # The stretch enters this zone if it reaches above the zone's lower edge, or is in it.
            if (far > below or below == 0.0) and near <= up_to:
                allowed = min(allowed, rate)
            below = up_to
        if far > below * (1 + _READS_HIGH):
            return 0.0
        spare = self.charge_voltage_max_v - self.lead_resistance_ohm * (
            far / self.coil_constant_t_per_a
        )
        return min(allowed, max(spare, 0.0) * self.coil_constant_t_per_a / self.inductance_h)


@dataclass
class _Supply:
    """What the supply believes, as far as the record tells."""

    rate_t_per_s: float = math.nan
    target_t: float = math.nan
    ramping: bool = False


def check_night(reader: NightReader) -> list[str]:
    """Violations in a night's ledger, each in a sentence; empty if there are none."""
    return check_commands(
        reader.commands(),
        reader.readings(),
        reader.events(),
        Limits.of(reader.description().rig_text),
    )


def check_commands(
    commands: Sequence[CommandRecord],
    readings: Sequence[Reading],
    events: Sequence[EventRecord],
    limits: Limits,
) -> list[str]:
    """Replay commands in their order against the limits."""
    numbers = [reading.number for reading in readings]
    discharged_s = min(
        (one.time_s for one in events if one.kind == "trip" and one.severity == "discharge"),
        default=math.inf,
    )
    supply = _Supply()
    found: list[str] = []
    for command in commands:
        if command.verdict == "refused":
            continue
        value = command.value if math.isnan(command.read_back) else command.read_back
        problem = ""
        if command.instrument == "stage" and command.operation == "setpoint":
            if not value <= limits.temperature_max_k * (1 + _ROUNDING):
                problem = f"set-point {value:g} K above {limits.temperature_max_k:g} K"
        elif command.instrument == "magnet":
            _apply(supply, command.operation, value)
            late = command.time_s > discharged_s and command.operation != "switch_heater"
            problem = "a ramp command after a quench" if late else ""
            fields = _fields_around(readings, bisect_right(numbers, command.reading_number))
            problem = problem or _problem(supply, fields, limits)
        if problem:
            found.append(
                f"command {command.id} at {command.time_s:.1f} s "
                f"({command.instrument} {command.operation} {value:g}): {problem}"
            )
    return found


def _apply(supply: _Supply, operation: str, value: float) -> None:
    if operation == "rate":
        supply.rate_t_per_s = value
    elif operation == "target":
        supply.target_t = value
    elif operation == "ramping":
        supply.ramping = value != 0


def _fields_around(readings: Sequence[Reading], index: int) -> list[float]:
    """The field as read last before a command and first after it; ``index`` is the latter's."""
    before = next(
        (one.values["field_t"] for one in reversed(readings[:index]) if "magnet" in one.taken_s),
        math.nan,
    )
    after = next(
        (one.values["field_t"] for one in readings[index:] if "magnet" in one.taken_s), math.nan
    )
    return [one for one in (before, after) if not math.isnan(one)]


def _problem(supply: _Supply, fields: list[float], limits: Limits) -> str:
    if not math.isnan(supply.target_t) and abs(supply.target_t) > limits.field_max_t * (
        1 + _ROUNDING
    ):
        return f"target {supply.target_t:g} T beyond {limits.field_max_t:g} T"
    if not supply.ramping:
        return ""
    if not fields:
        return "the supply ramps while nobody knows the field"
    if math.isnan(supply.rate_t_per_s) or math.isnan(supply.target_t):
        return "the supply ramps with a rate or a target that was never set"
    ends = [*fields, supply.target_t]
    allowed = limits.rate_allowed(min(ends), max(ends))
    if supply.rate_t_per_s > allowed * (1 + _ROUNDING):
        return (
            f"left alone, the supply would ramp at {60 * supply.rate_t_per_s:g} T/min between "
            f"{min(ends):.4f} T and {max(ends):.4f} T, where {60 * allowed:g} T/min is allowed"
        )
    return ""
