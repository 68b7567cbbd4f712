"""What every step of a night works with, and how trips and people interrupt it."""

import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Protocol

from orchestrator.config.document import Document
from orchestrator.config.rig import Rig
from orchestrator.engine.sampler import Sampler
from orchestrator.interlocks.conditions import Response
from orchestrator.interlocks.gate import Gate, Trip
from orchestrator.interlocks.sentinel import Sentinel
from orchestrator.ledger.writing import Ledger
from orchestrator.planning.belief import Belief
from orchestrator.readings import Reading
from orchestrator.stream.messages import FindingMessage, NightState

HOLD_PATIENCE_S = 1800.0  # how long a hold waits for a person before the night parks


class Interrupted(Exception):
    """A trip ended the step; the night parks, or leaves a quench to discharge."""

    def __init__(self, trip: Trip) -> None:
        self.trip = trip
        super().__init__(f"{trip.name}: {trip.text}")


class Outlet(Protocol):
    """Where a night tells what happens, and from where findings come."""

    def reading(self, reading: Reading) -> None:
        """A reading is in the ledger."""
        ...

    def event(self, kind: str, name: str, data: dict[str, Any]) -> None:
        """An event is in the ledger."""
        ...

    def state(self, state: NightState) -> None:
        """The night's state has changed."""
        ...

    def findings(self) -> list[FindingMessage]:
        """The findings that have come since the last call."""
        ...

    def close(self) -> None:
        """The night has ended."""
        ...


@dataclass
class Work:
    """The night's parts, as a step sees them."""

    rig: Rig
    document: Document
    gate: Gate
    sentinel: Sentinel
    sampler: Sampler
    ledger: Ledger
    outlet: Outlet
    clock: Callable[[], float]
    belief: Belief
    park_asked: threading.Event
    parking: bool = False
    findings_taken: int = 0
    overloaded: set[str] = field(default_factory=set)

    def event(
        self, kind: str, name: str, text: str = "", severity: str = "info", **data: Any
    ) -> None:
        """Record an event and tell it."""
        self.ledger.append_event(kind=kind, name=name, severity=severity, text=text, data=data)
        self.outlet.event(kind, name, data)

    async def next_reading(self) -> Reading:
        """The next reading, after trips, findings and requests have been seen to.

        A hold waits here until a person acknowledges it, and then lets the step go on.

        Raises
        ------
        Interrupted
            A trip that ends the step, or a hold that nobody has answered in time.
        """
        reading = await self.sampler.next()
        await self._see_to_requests()
        self._take_findings()
        self._tell_overloads(reading)
        held_since_s: float | None = None
        while (trip := self._trip_that_counts()) is not None:
            if self.parking or trip.response > Response.HOLD:
                raise Interrupted(trip)
            held_since_s = self.clock() if held_since_s is None else held_since_s
            if self.clock() - held_since_s > HOLD_PATIENCE_S:
                self.event("warning", trip.name, "nobody came within the patience of a hold")
                raise Interrupted(trip)
            reading = await self.sampler.next()
            await self._see_to_requests()
        return reading

    async def wait(self, seconds: float) -> Reading:
        """Let the night's clock run on; readings, trips and requests are seen to meanwhile."""
        end_s = self.clock() + seconds
        reading = await self.next_reading()
        while self.clock() < end_s:
            reading = await self.next_reading()
        return reading

    def _tell_overloads(self, reading: Reading) -> None:
        """An overloaded lock-in spoils data, not the rig: it is told once, and again when over."""
        for one in self.rig.lock_ins:
            if one.name not in reading.taken_s:
                continue
            overload = reading.values[f"{one.name}_overload"] != 0
            if overload and one.name not in self.overloaded:
                self.overloaded.add(one.name)
                text = f"{one.name} is overloaded at {one.sensitivity_v:g} V: its readings are lost"
                self.event("warning", f"overload-{one.name}", text, "medium")
            elif not overload and one.name in self.overloaded:
                self.overloaded.discard(one.name)
                self.event("warning", f"overload-{one.name}", f"{one.name} reads again")

    def _trip_that_counts(self) -> Trip | None:
        least = Response.DISCHARGE if self.parking else Response.HOLD
        return next((trip for trip in self.gate.trips if trip.response >= least), None)

    async def _see_to_requests(self) -> None:
        if self.park_asked.is_set():
            self.park_asked.clear()
            trip = self.gate.latch("park", Response.PARK, "asked for at the keyboard")
            if trip:
                await self.sentinel.answer(trip)
        for request in self.ledger.pending_requests():
            self.ledger.take_request(request.id, self.clock())
            what = f"{request.kind} {request.name}".strip()
            text = f"{what} asked for by {request.person or 'a person'}: {request.reason}"
            self.event("request", request.kind, text, person=request.person)
            if request.kind == "acknowledge":
                self.gate.acknowledge(request.name, request.person, request.reason)
                continue
            response = Response.HOLD if request.kind == "hold" else Response.PARK
            if trip := self.gate.latch(request.kind, response, text):
                await self.sentinel.answer(trip)

    def _take_findings(self) -> None:
        for message in self.outlet.findings():
            data = dict(message.data)
            self.ledger.append_finding(source=message.source, data=data)
            orbits = data.get("orbits")
            if isinstance(orbits, list) and orbits:
                self.belief = self.belief.with_findings(
                    [one for one in orbits if isinstance(one, dict)]
                )
            self.findings_taken += 1
