"""Listening to a night: messages in order, each once, and what was missed asked for again."""

import asyncio
from collections import deque
from collections.abc import AsyncIterator, Mapping
from dataclasses import dataclass
from typing import Any

import aiomqtt

from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.gaps import Asking, InOrder
from orchestrator.stream.messages import (
    LOST,
    MOST_READINGS,
    AlarmMessage,
    EventMessage,
    FindingMessage,
    Message,
    MessageError,
    ReadingBatch,
    Row,
    StateMessage,
    WantedMessage,
    decode,
    encode,
    topic_of,
)

_FIRST_PAUSE_S = 0.2
_LONGEST_PAUSE_S = 5.0
_ACKNOWLEDGE_S = 10.0
_KEEPALIVE_S = 15
_PATIENCE_S = 3.0  # longer than the publisher's pause between states
_MOST_INCOMING = 2000
_ALARMS_REMEMBERED = 1000


@dataclass
class SubscriberCounts:
    """What a subscriber has seen: connections made and failed, messages not used, and why."""

    connections: int = 0
    failures: int = 0
    garbage: int = 0
    foreign: int = 0
    duplicates: int = 0
    asked: int = 0
    last_error: str = ""


class Subscriber:
    """A night's messages as an asynchronous iterator that outlives the broker.

    Readings come in the order of their numbers without gaps, events likewise; states, alarms and
    findings as they arrive. The iterator ends only when its task is cancelled or it is closed.

    Parameters
    ----------
    address : BrokerAddress
        The broker; it need not be there yet.
    rig : str
        Whose messages.
    night : str or None
        Only this night's; None follows whatever night the rig has.
    from_start : bool
        Ask for everything from the first reading on; otherwise begin with the newest.

    Examples
    --------
    >>> async def follow(subscriber: Subscriber) -> None:
    ...     async for message in subscriber:
    ...         print(message.kind, message.seq)
    """

    def __init__(
        self,
        address: BrokerAddress,
        *,
        rig: str,
        night: str | None = None,
        from_start: bool = False,
    ) -> None:
        topic_of(rig, "state")
        self._address = address
        self._rig = rig
        self._only = night
        self._night = night
        self._first = 1 if from_start else None
        self._client: aiomqtt.Client | None = None
        self._finding: Mapping[str, Any] | None = None
        self._finding_source = ""
        self._finding_seq = 0
        self.counts = SubscriberCounts()
        self._begin_night()

    @property
    def connected(self) -> bool:
        """Whether the broker is there now."""
        return self._client is not None

    @property
    def night(self) -> str | None:
        """The night that is being followed; None before the first message."""
        return self._night

    async def __aiter__(self) -> AsyncIterator[Message]:
        pause_s = _FIRST_PAUSE_S
        while True:
            try:
                async with aiomqtt.Client(
                    **self._address.client_options(),
                    timeout=_ACKNOWLEDGE_S,
                    keepalive=_KEEPALIVE_S,
                    max_queued_incoming_messages=_MOST_INCOMING,
                ) as client:
                    # The retained state first: it says what is new to who does not want the past.
                    for kind in ("state", "reading", "event", "alarm", "finding"):
                        await client.subscribe(topic_of(self._rig, kind), qos=1)
                    self._client = client
                    self.counts.connections += 1
                    pause_s = _FIRST_PAUSE_S
                    async for arrived in client.messages:
                        for message in self._take(str(arrived.topic), arrived.payload):
                            yield message
                        await self._ask(client)
                        await self._send_waiting_finding(client)
            except (aiomqtt.MqttError, OSError) as error:
                self.counts.failures += 1
                self.counts.last_error = str(error)
            finally:
                self._client = None
            await asyncio.sleep(pause_s)
            pause_s = min(2 * pause_s, _LONGEST_PAUSE_S)

    async def send_finding(self, source: str, data: Mapping[str, Any]) -> None:
        """Send a finding to the night; the newest is kept and sent when the broker is back."""
        self._finding_source, self._finding = source, dict(data)
        if self._client is not None:
            try:
                await self._send_waiting_finding(self._client)
            except aiomqtt.MqttError as error:
                self.counts.last_error = str(error)

    def _begin_night(self) -> None:
        self._readings: InOrder[Row] = InOrder(self._first)
        self._events: InOrder[EventMessage] = InOrder(self._first)
        self._state: StateMessage | None = None
        self._alarms: deque[int] = deque(maxlen=_ALARMS_REMEMBERED)
        self._asking = {"reading": Asking(_PATIENCE_S), "event": Asking(_PATIENCE_S)}

    def _take(self, topic: str, payload: object) -> list[Message]:
        """What an arrived payload gives to the caller, which may be nothing or much."""
        try:
            message = decode(topic, payload)
        except MessageError:
            self.counts.garbage += 1
            return []
        if not self._is_ours(message):
            self.counts.foreign += 1
            return []
        if isinstance(message, ReadingBatch):
            return list(self._batches(message))
        if isinstance(message, EventMessage):
            return list(self._new_events(message))
        if isinstance(message, StateMessage):
            self._readings.know_of(message.last_reading)
            self._events.know_of(message.last_event)
            if message == self._state:  # a retained message may come twice
                self.counts.duplicates += 1
                return []
            self._state = message
        return [message]

    def _new_events(self, message: EventMessage) -> list[EventMessage]:
        if not isinstance(message, AlarmMessage):
            return self._events.accept([(message.seq, message)])
        if message.seq in self._alarms:
            self.counts.duplicates += 1
            return []
        self._alarms.append(message.seq)
        return [message]

    def _batches(self, arrived: ReadingBatch) -> list[ReadingBatch]:
        before = self._readings.duplicates
        rows = self._readings.accept((row[0], row) for row in arrived.rows)
        self.counts.duplicates += self._readings.duplicates - before
        if len(rows) == len(arrived.rows) and rows[0][0] == arrived.first:
            return [arrived]
        parts = [rows[at : at + MOST_READINGS] for at in range(0, len(rows), MOST_READINGS)]
        return [
            arrived.model_copy(
                update={
                    "first": part[0][0],
                    "last": part[-1][0],
                    "seq": part[-1][0],
                    "rows": tuple(part),
                }
            )
            for part in parts
        ]

    def _is_ours(self, message: Message) -> bool:
        if message.rig != self._rig:  # amqtt gives new clients what others have subscribed to
            return False
        if message.night == self._night:
            return True
        if self._only is not None:
            return False
        dead = isinstance(message, StateMessage) and message.state.outcome == LOST
        if self._night is not None and (dead or isinstance(message, FindingMessage)):
            return False  # the last will of an earlier night, or its analyst's late word
        self._night = message.night
        self._begin_night()
        return True

    async def _ask(self, client: aiomqtt.Client) -> None:
        """Ask the publisher for what is missing, when it is time to."""
        now_s = asyncio.get_running_loop().time()
        gaps = {"reading": self._readings.missing(), "event": self._events.missing()}
        for what, gap in gaps.items():
            if self._night is None or gap is None or not self._asking[what].due(gap, now_s):
                continue
            wanted = WantedMessage.model_validate(
                {
                    "night": self._night,
                    "rig": self._rig,
                    "seq": self.counts.asked,
                    "what": what,
                    "first": gap[0],
                    "last": gap[1],
                }
            )
            self.counts.asked += 1
            await client.publish(topic_of(self._rig, "wanted"), encode(wanted)[1], qos=1)

    async def _send_waiting_finding(self, client: aiomqtt.Client) -> None:
        if self._finding is None or self._night is None:
            return
        waiting = self._finding
        message = FindingMessage(
            night=self._night,
            rig=self._rig,
            seq=self._finding_seq + 1,
            source=self._finding_source,
            data=dict(waiting),
        )
        await client.publish(topic_of(self._rig, "finding"), encode(message)[1], qos=1)
        self._finding_seq += 1
        if self._finding is waiting:
            self._finding = None
