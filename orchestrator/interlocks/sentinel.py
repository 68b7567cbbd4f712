"""The sentinel: every reading against every interlock, and the first answer to a trip.

The first answer is given here at once: hold the magnet, heaters off. What the night then does
(wait for a person, park, leave the supply to discharge) follows from the trip's response.
"""

from collections.abc import Awaitable, Callable, Mapping

from orchestrator.config.rig import Rig
from orchestrator.interlocks.conditions import (
    Condition,
    Look,
    Response,
    Sight,
    Verdict,
    conditions_of,
)
from orchestrator.interlocks.gate import Gate, Refused, Trip, Unanswered
from orchestrator.readings import Channel, Reading


class Sentinel:
    """Watches the readings of one night.

    Parameters
    ----------
    rig : Rig
        Its limits make the conditions.
    channels : tuple of Channel
        Which value belongs to which instrument.
    gate : Gate
        Latches the trips and sends the answers.
    clock : Callable[[], float]
        The night's clock in seconds.
    """

    def __init__(
        self, rig: Rig, channels: tuple[Channel, ...], gate: Gate, clock: Callable[[], float]
    ) -> None:
        self.conditions: tuple[Condition, ...] = conditions_of(rig)
        self._names: dict[str, tuple[str, ...]] = {}
        for channel in channels:
            self._names[channel.instrument] = (
                *self._names.get(channel.instrument, ()),
                channel.name,
            )
        self._gate = gate
        self._clock = clock
        self._started_s = clock()
        self._newest: dict[str, Sight] = {}
        self._before: dict[str, Sight] = {}
        self.verdicts: dict[str, Verdict] = {}

    async def observe(self, reading: Reading, asked_s: Mapping[str, float]) -> tuple[Trip, ...]:
        """Judge a reading; latch and answer what trips.

        Parameters
        ----------
        reading : Reading
            As it went to the ledger.
        asked_s : Mapping[str, float]
            When each instrument that answered had been asked; a late answer long before.

        Returns
        -------
        tuple of Trip
            The new ones, the worst first.
        """
        for instrument, taken_s in reading.taken_s.items():
            if instrument in self._newest:
                self._before[instrument] = self._newest[instrument]
            values = {name: reading.values[name] for name in self._names[instrument]}
            self._newest[instrument] = Sight(taken_s, values, asked_s[instrument])
        self._gate.observe(reading)
        look = Look(self._clock(), self._started_s, self._newest, self._before, self._gate.ramp)
        new = []
        for condition in self.conditions:
            verdict = condition.judge(look)
            self.verdicts[condition.name] = verdict
            if verdict.tripped:
                trip = self._gate.latch(condition.name, condition.response, verdict.text)
                if trip:
                    new.append(trip)
        for trip in new:
            await self.answer(trip)
        return tuple(new)

    async def fault(self, name: str, text: str) -> None:
        """Latch and answer a fault of the night's own means, such as a disk that is full."""
        trip = self._gate.latch(name, Response.PARK, text)
        if trip:
            await self.answer(trip)

    async def answer(self, trip: Trip) -> None:
        """Hold the magnet, or after a quench leave it to discharge; heaters off."""
        if trip.response >= Response.PARK:
            await self._try(lambda: self._gate.heater(False))
        if trip.response in (Response.HOLD, Response.PARK) and self._gate.ramp.ramping:
            await self._try(self._gate.hold)

    async def _try(self, command: Callable[[], Awaitable[None]]) -> None:
        """Send an answer; one that fails is latched and recorded by the gate already."""
        try:
            await command()
        except (Refused, Unanswered):
            return
