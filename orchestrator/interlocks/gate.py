"""The gate: the only place through which a command can reach an instrument.

Each command is checked against the rig's limits as if it were the last that the instrument ever
receives, recorded, sent, and read back. A refusal says which limit, by how much, and where in the
rig file it stands. A trip is latched here; while one stands, only commands towards rest pass.
"""

import math
from collections.abc import Awaitable, Callable
from dataclasses import dataclass, replace
from typing import Any

from drivers.capabilities import Written
from orchestrator.bench import Bench
from orchestrator.config.document import Document
from orchestrator.config.rig import Rig
from orchestrator.interlocks.conditions import Ramp, Response
from orchestrator.ledger.writing import Ledger
from orchestrator.planning.ceilings import safety
from orchestrator.readings import Reading

_RELATIVE = 1e-6
_FIELD_TOLERANCE_T = 1e-5
_OVERHEAD_S = 1.0  # longest time that a command may be under way


class Refused(Exception):
    """The gate did not let a command through; the message says which limit, and where it stands."""


class Unanswered(Exception):
    """A command went out, or tried to, and the instrument did not confirm it."""


@dataclass(frozen=True, slots=True)
class Trip:
    """An interlock that has fired; it stays until a person acknowledges it."""

    name: str
    response: Response
    text: str
    time_s: float


class Gate:
    """Commands of the night, checked, recorded, sent and read back.

    Parameters
    ----------
    bench : Bench
        The opened instruments; nobody else writes to them.
    rig, document : Rig, Document
        The limits, and where they stand.
    ledger : Ledger
        Where every command is recorded, accepted or not.
    clock : Callable[[], float]
        The night's clock in seconds.
    """

    def __init__(
        self,
        bench: Bench,
        rig: Rig,
        document: Document,
        ledger: Ledger,
        clock: Callable[[], float],
    ) -> None:
        self._bench = bench
        self._rig = rig
        self._document = document
        self._ledger = ledger
        self._clock = clock
        self._ceilings = safety(rig.magnet)
        self._trips: dict[str, Trip] = {}
        self._field_t = math.nan
        self._field_taken_s = -math.inf
        self._persistent_t = math.nan
        self.ramp = Ramp()

    # -- what is known ----------------------------------------------------------------------------

    @property
    def trips(self) -> tuple[Trip, ...]:
        """The trips that stand, the worst first."""
        return tuple(sorted(self._trips.values(), key=lambda trip: -trip.response))

    def observe(self, reading: Reading) -> None:
        """Take note of the field that was read; called by the sampler for every reading."""
        if (taken := reading.taken_s.get("magnet")) is not None:
            self._field_t = reading.values["field_t"]
            self._field_taken_s = taken
            self._persistent_t = reading.values["persistent_field_t"]

    def latch(self, name: str, response: Response, text: str) -> Trip | None:
        """Latch a trip and record it; None if it stands already."""
        if name in self._trips:
            return None
        trip = Trip(name, response, text, self._clock())
        self._trips[name] = trip
        self._ledger.append_event(kind="trip", name=name, severity=response.name.lower(), text=text)
        return trip

    def acknowledge(self, name: str, person: str, reason: str) -> bool:
        """Clear a trip by its name, for a person with a reason; False if it does not stand."""
        if self._trips.pop(name, None) is None:
            return False
        text = f"{name} acknowledged by {person}: {reason}"
        data = {"person": person, "reason": reason}
        self._ledger.append_event(kind="acknowledge", name=name, text=text, data=data)
        return True

    # -- the magnet -------------------------------------------------------------------------------

    async def rate(self, rate_t_per_s: float) -> None:
        """Set the ramp rate."""
        ramp = replace(self.ramp, rate_t_per_s=rate_t_per_s)
        self._check(self._ramp_problem(ramp), "magnet", "rate", rate_t_per_s)
        resolution = self._rig.magnet.rate_resolution_t_per_s
        written = await self._send(
            "magnet", "rate", rate_t_per_s, self._bench.magnet.write_rate, resolution * 1.01
        )
        self.ramp = replace(
            self.ramp, rate_t_per_s=float(written.read_back), changed_s=self._clock()
        )

    async def target(self, field_t: float) -> None:
        """Set the field towards which the supply ramps."""
        ramp = replace(self.ramp, target_t=field_t)
        problem = self._target_problem(field_t) or self._ramp_problem(ramp)
        self._check(problem, "magnet", "target", field_t)
        written = await self._send(
            "magnet", "target", field_t, self._bench.magnet.write_target, _FIELD_TOLERANCE_T
        )
        self.ramp = replace(self.ramp, target_t=float(written.read_back), changed_s=self._clock())

    async def go(self) -> None:
        """Let the supply ramp towards its target."""
        ramp = replace(self.ramp, ramping=True)
        problem = self._ramp_problem(ramp) or self._target_problem(ramp.target_t)
        self._check(problem, "magnet", "ramping", 1.0)
        await self._send("magnet", "ramping", True, self._bench.magnet.write_ramping, 0.0)
        self.ramp = replace(ramp, changed_s=self._clock())

    async def hold(self) -> None:
        """Make the supply hold where it is. Never refused, but after a quench it is not sent."""
        self._check(self._quench_problem(), "magnet", "ramping", 0.0)
        await self._send("magnet", "ramping", False, self._bench.magnet.write_ramping, 0.0)
        self.ramp = replace(self.ramp, ramping=False, changed_s=self._clock())

    async def switch_heater(self, on: bool) -> None:
        """Heat the persistent switch, or let it cool; only where leads and coil agree."""
        problem = self._switch_problem() if on else ""
        self._check(problem, "magnet", "switch_heater", float(on))
        await self._send("magnet", "switch_heater", on, self._bench.magnet.write_switch_heater, 0)
        now = self._clock()
        self.ramp = replace(self.ramp, heater_changed_s=now, changed_s=now)

    # -- the stage and the lock-ins ---------------------------------------------------------------

    async def setpoint(self, temperature_k: float) -> None:
        """Set the stage's set-point."""
        stage = self._rig.stage
        low, high = stage.temperature_min_k, stage.temperature_max_k
        problem = self._trip_problem()
        if not problem and not low <= temperature_k <= high:
            place = self._document.where("stage", "temperature_max")
            problem = f"set-point {temperature_k:g} K is outside {low:g} K to {high:g} K, {place}"
        self._check(problem, "stage", "setpoint", temperature_k)
        await self._send("stage", "setpoint", temperature_k, self._bench.stage.write_setpoint, 1e-4)

    async def setpoint_ramp(self, rate_k_per_s: float) -> None:
        """Set the rate at which the set-point is approached."""
        most = self._rig.stage.ramp_max_k_per_s
        problem = ""
        if not 0 < rate_k_per_s <= most * (1 + _RELATIVE):
            place = self._document.where("stage", "ramp_max")
            problem = f"{60 * rate_k_per_s:g} K/min is beyond {60 * most:g} K/min, {place}"
        self._check(problem, "stage", "setpoint_ramp", rate_k_per_s)
        await self._send(
            "stage", "setpoint_ramp", rate_k_per_s, self._bench.stage.write_setpoint_ramp, 1e-6
        )

    async def heater(self, on: bool) -> None:
        """Switch the stage's heater; off is never refused."""
        self._check(self._trip_problem() if on else "", "stage", "heater", float(on))
        await self._send("stage", "heater", on, self._bench.stage.write_heater, 0)

    async def set_up_lock_in(self, name: str) -> None:
        """Give a lock-in the settings of the rig file."""
        settings = next(one for one in self._rig.lock_ins if one.name == name)
        lock_in = self._bench.lock_ins[name]
        amplitude_v = settings.excitation_a * settings.series_resistance_ohm
        await self._send(name, "frequency", settings.frequency_hz, lock_in.write_frequency, 1e-3)
        await self._send(
            name, "time_constant", settings.time_constant_s, lock_in.write_time_constant, 1e-9
        )
        await self._send(name, "sensitivity", settings.sensitivity_v, lock_in.write_sensitivity, 0)
        await self._send(name, "amplitude", amplitude_v, lock_in.write_amplitude, 1e-4)
        await self._send(name, "filter_order", settings.filter_poles, lock_in.write_filter_order, 0)

    # -- checks -----------------------------------------------------------------------------------

    def _check(self, problem: str, instrument: str, operation: str, value: float) -> None:
        if not problem:
            return
        self._ledger.append_command(
            instrument=instrument,
            operation=operation,
            value=value,
            sent="",
            read_back=None,
            verdict="refused",
            reason=problem,
        )
        raise Refused(f"{instrument} {operation} {value:g} refused: {problem}")

    def _trip_problem(self) -> str:
        worst = next((one for one in self.trips if one.response >= Response.HOLD), None)
        return f"the trip {worst.name} stands" if worst else ""

    def _quench_problem(self) -> str:
        for trip in self.trips:
            if trip.response == Response.DISCHARGE:
                return f"the trip {trip.name} stands, and a quench is never answered with a ramp"
        return ""

    def _target_problem(self, target_t: float) -> str:
        """Whether a target leaves the magnet's range, or leads away from rest under a trip."""
        most = self._rig.magnet.field_max_t
        if not abs(target_t) <= most * (1 + _RELATIVE):
            place = self._document.where("magnet", "field_max")
            beyond = abs(target_t) - most
            return f"target {target_t:g} T is {beyond:g} T beyond {most:g} T, {place}"
        towards_rest = abs(target_t) <= abs(self._field_t) and target_t * self._field_t >= 0
        if (problem := self._trip_problem()) and not towards_rest:
            return problem
        return ""

    def _ramp_problem(self, ramp: Ramp) -> str:
        """Whether the supply would be safe with this ramp if it never heard from us again."""
        if problem := self._quench_problem():
            return problem
        if not ramp.ramping:
            return ""
        if math.isnan(ramp.rate_t_per_s) or math.isnan(ramp.target_t):
            return "the supply would ramp with a rate or a target that was never set"
        age = self._clock() - self._field_taken_s
        if not age <= self._rig.sampling.stale_after_s:
            place = self._document.where("sampling", "stale_after")
            return f"the field was last read {age:.1f} s ago, {place}"
        ends = (*self._whereabouts(age), ramp.target_t)
        allowed, binding = self._ceilings.over(min(ends), max(ends))
        if not 0 < ramp.rate_t_per_s <= allowed * (1 + _RELATIVE):
            place = self._document.where("magnet", "ramp_ceiling")
            return (
                f"{60 * ramp.rate_t_per_s:g} T/min between {min(ends):.4f} T and {max(ends):.4f} T"
                f" is beyond {60 * allowed:g} T/min ({binding}), {place}"
            )
        return ""

    def _whereabouts(self, age_s: float) -> tuple[float, float]:
        """The field as read, and the farthest that it can be by now on its present way."""
        now = self.ramp
        if not now.ramping or math.isnan(now.rate_t_per_s) or math.isnan(now.target_t):
            return self._field_t, self._field_t
        reach = now.rate_t_per_s * (age_s + _OVERHEAD_S)
        way = now.target_t - self._field_t
        return self._field_t, self._field_t + math.copysign(min(reach, abs(way)), way)

    def _switch_problem(self) -> str:
        if problem := self._quench_problem():
            return problem
        age = self._clock() - self._field_taken_s
        if not age <= self._rig.sampling.stale_after_s:
            place = self._document.where("sampling", "stale_after")
            return f"the lead current was last read {age:.1f} s ago, {place}"
        difference = abs(self._field_t - self._persistent_t)
        if not difference <= 1e-3 * self._rig.magnet.field_max_t:
            return (
                f"leads at {self._field_t:.4f} T and coil at {self._persistent_t:.4f} T differ; "
                "warming the switch would quench the coil"
            )
        return ""

    # -- the wire ---------------------------------------------------------------------------------

    async def _send(
        self,
        instrument: str,
        operation: str,
        value: Any,
        write: Callable[[Any], Awaitable[Written]],
        tolerance: float,
    ) -> Written:
        """Send, read back, compare, record. Raises Unanswered after latching a trip."""
        try:
            written = await write(value)
        except Exception as error:  # whatever the link says, the command is not confirmed
            self._record(instrument, operation, value, "", None, "failed", str(error))
            name = f"unconfirmed-{instrument}-{operation}"
            self.latch(name, Response.PARK, f"{instrument} did not confirm {operation}: {error}")
            raise Unanswered(f"{instrument} did not confirm {operation}: {error}") from error
        back = float(written.read_back)
        if abs(back - float(value)) <= tolerance + _RELATIVE * abs(float(value)):
            self._record(instrument, operation, value, written.sent, back, "accepted", "")
            return written
        text = f"{instrument} {operation}: sent {float(value):g}, reads back {back:g}"
        self._record(instrument, operation, value, written.sent, back, "mismatch", text)
        self.latch(f"read-back-{instrument}-{operation}", Response.PARK, text)
        raise Unanswered(text)

    def _record(
        self,
        instrument: str,
        operation: str,
        value: Any,
        sent: str,
        back: float | None,
        verdict: Any,
        reason: str,
    ) -> None:
        self._ledger.append_command(
            instrument=instrument,
            operation=operation,
            value=float(value),
            sent=sent,
            read_back=back,
            verdict=verdict,
            reason=reason,
        )
