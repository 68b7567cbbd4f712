"""Sending a night's ledger out as it grows.

The publisher lives in a thread of its own with an ordinary event loop and its own read-only
connection to the ledger, so that nothing that happens to the broker reaches the night. The ledger
is the queue: what the broker has not acknowledged is read from there again.
"""

import asyncio
import queue
import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import aiomqtt

from orchestrator.ledger.records import EventRecord
from orchestrator.readings import Channel, Reading
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.gaps import Replay
from orchestrator.stream.messages import (
    LOST,
    AlarmMessage,
    EventMessage,
    FindingMessage,
    Message,
    MessageError,
    NightState,
    ReadingBatch,
    StateMessage,
    WantedMessage,
    decode,
    encode,
    topic_of,
)

_POLL_S = 0.2
_STATE_EVERY_S = 2.0  # says how far the ledger has come, so that a lost tail is noticed
_FIRST_PAUSE_S = 0.2
_LONGEST_PAUSE_S = 5.0
_ACKNOWLEDGE_S = 10.0
_KEEPALIVE_S = 15
_READINGS_A_MESSAGE = 200
_EVENTS_A_TURN = 50
_MOST_INCOMING = 200


class NightSource(Protocol):
    """What the publisher needs of a ledger; `orchestrator.ledger.reading.NightReader` has it."""

    def channels(self) -> Sequence[Channel]: ...

    def readings(self, after: int = 0, limit: int = ...) -> list[Reading]: ...

    def events(self, after_id: int = 0, limit: int = ...) -> list[EventRecord]: ...

    def last_number(self) -> int: ...

    def last_event_id(self) -> int: ...

    def close(self) -> None: ...


@dataclass(frozen=True, slots=True)
class PublisherCounts:
    """What the publisher has done so far. Nothing of the night is ever dropped.

    Attributes
    ----------
    readings, events : int
        Acknowledged by the broker, without those sent again on request.
    resent : int
        Readings and events sent again because a subscriber asked.
    connections, failures : int
        How often the broker was reached, and how often reaching it or talking to it failed.
    garbage, foreign : int
        Messages that did not decode, and messages of another night or rig.
    findings_dropped : int
        Findings that were replaced by newer ones before the engine took them.
    last_error : str
        Why the last failure happened; empty if none has.
    """

    readings: int = 0
    events: int = 0
    resent: int = 0
    connections: int = 0
    failures: int = 0
    garbage: int = 0
    foreign: int = 0
    findings_dropped: int = 0
    last_error: str = ""


class Publisher:
    """Publishes a night's ledger to a broker.

    Parameters
    ----------
    address : BrokerAddress
        The broker; it need not be there.
    rig, night : str
        Names that stand in topics and messages.
    open_source : Callable[[], NightSource]
        Opens the ledger for reading; called in the publisher's thread.
    alarm_kinds : frozenset of str
        Kinds of event that go out as alarms as well.
    most_findings : int
        How many findings wait for the engine; when there are more, the oldest goes.

    Notes
    -----
    Commands cannot come in: of all topics only ``finding`` and ``wanted`` are subscribed to, and
    what arrives is either a finding, handed over as data, or a wish to hear something again.
    """

    def __init__(
        self,
        address: BrokerAddress,
        *,
        rig: str,
        night: str,
        open_source: Callable[[], NightSource],
        alarm_kinds: frozenset[str] = frozenset({"trip", "acknowledge"}),
        most_findings: int = 64,
    ) -> None:
        topic_of(rig, "state")  # refuses a name that cannot be a topic before the night begins
        self._address = address
        self._rig = rig
        self._night = night
        self._open_source = open_source
        self._alarm_kinds = alarm_kinds
        self._findings: queue.Queue[FindingMessage] = queue.Queue(most_findings)
        self._state = NightState()
        self._state_sent: NightState | None = None
        self._state_sent_s = 0.0
        self._state_seq = 0
        self._last_reading = 0
        self._last_event = 0
        self._wanted = {"reading": Replay(), "event": Replay()}
        self._counts = PublisherCounts()
        self._connected = False
        self._stopping = threading.Event()
        self._thread: threading.Thread | None = None

    @property
    def counts(self) -> PublisherCounts:
        """What has been done so far; may be asked for from any thread."""
        return self._counts

    @property
    def connected(self) -> bool:
        """Whether the broker is there now."""
        return self._connected

    def start(self) -> None:
        """Begin to publish; returns at once."""
        if self._thread is not None:
            raise RuntimeError("the publisher has been started already")
        self._thread = threading.Thread(target=self._run, name="publisher", daemon=True)
        self._thread.start()

    def stop(self, timeout_s: float = 5.0) -> None:
        """Send what is still in the ledger, if the broker is there, and end; safe to call twice.

        Returns after ``timeout_s`` seconds of wall time at the latest, published or not.
        """
        self._stopping.set()
        if self._thread is not None:
            self._thread.join(timeout_s)

    def update(self, state: NightState) -> None:
        """Replace the state that is published; from any thread, never blocks."""
        self._state = state

    def take_findings(self) -> list[FindingMessage]:
        """Findings that arrived since the last call, oldest first; from any thread."""
        taken: list[FindingMessage] = []
        while True:
            try:
                taken.append(self._findings.get_nowait())
            except queue.Empty:
                return taken

    def _run(self) -> None:
        with asyncio.Runner(loop_factory=asyncio.SelectorEventLoop) as runner:
            runner.run(self._publish_until_stopped())

    async def _publish_until_stopped(self) -> None:
        """Keep at it: whatever fails is counted, and tried again after a growing pause."""
        pause_s = _FIRST_PAUSE_S
        while True:
            connections = self._counts.connections
            try:
                await self._one_connection()
                return
            except Exception as error:  # nothing may end the publisher but the night's end
                self._count(failures=1, last_error=f"{type(error).__name__}: {error}")
            finally:
                self._connected = False
            if self._counts.connections > connections:
                pause_s = _FIRST_PAUSE_S
            # The event is set by another thread, and a late look costs 50 ms at most.
            until_s = time.monotonic() + pause_s
            while time.monotonic() < until_s:
                if self._stopping.is_set():
                    return
                await asyncio.sleep(0.05)
            pause_s = min(2 * pause_s, _LONGEST_PAUSE_S)

    async def _one_connection(self) -> None:
        source = self._open_source()
        try:
            lost = self._state_message(source, self._state.model_copy(update={"outcome": LOST}))
            async with aiomqtt.Client(
                **self._address.client_options(),
                will=aiomqtt.Will(
                    topic_of(self._rig, "state"), encode(lost)[1], qos=1, retain=True
                ),
                timeout=_ACKNOWLEDGE_S,
                keepalive=_KEEPALIVE_S,
                max_queued_incoming_messages=_MOST_INCOMING,
            ) as client:
                self._count(connections=1)
                self._connected = True
                self._state_sent = None
                await self._send_state(client, source)
                for kind in ("finding", "wanted"):
                    await client.subscribe(topic_of(self._rig, kind), qos=1)
                listener = asyncio.create_task(self._listen(client))
                try:
                    await self._send_until_stopped(client, source, listener)
                finally:
                    listener.cancel()
        finally:
            source.close()

    async def _send_until_stopped(
        self, client: aiomqtt.Client, source: NightSource, listener: "asyncio.Task[None]"
    ) -> None:
        while True:
            if listener.done():
                listener.result()  # raises what ended the connection
            stopping = self._stopping.is_set()
            busy = await self._send_new_readings(client, source)
            busy = await self._send_new_events(client, source) or busy
            busy = await self._send_wanted(client, source) or busy
            due = time.monotonic() - self._state_sent_s >= _STATE_EVERY_S
            if due or self._state is not self._state_sent or (stopping and not busy):
                await self._send_state(client, source)
            if stopping and not busy:
                return
            await asyncio.sleep(0 if busy else _POLL_S)

    async def _send_new_readings(self, client: aiomqtt.Client, source: NightSource) -> bool:
        readings = source.readings(self._last_reading, _READINGS_A_MESSAGE)
        if not readings:
            return False
        await self._send(client, self._batch(readings, source))
        self._last_reading = readings[-1].number
        self._count(readings=len(readings))
        return len(readings) == _READINGS_A_MESSAGE

    async def _send_new_events(self, client: aiomqtt.Client, source: NightSource) -> bool:
        events = source.events(self._last_event, _EVENTS_A_TURN)
        for event in events:
            await self._send_event(client, event)
            self._last_event = event.id
            self._count(events=1)
        return len(events) == _EVENTS_A_TURN

    async def _send_wanted(self, client: aiomqtt.Client, source: NightSource) -> bool:
        """Send one message's worth of what subscribers asked for again."""
        wanted = self._wanted["reading"]
        if span := wanted.next_range():
            limit = min(_READINGS_A_MESSAGE, span[1] - span[0] + 1)
            if readings := source.readings(span[0] - 1, limit):
                await self._send(client, self._batch(readings, source))
                self._count(resent=len(readings))
                wanted.sent(readings[-1].number)
            else:
                wanted.nothing_left()
        wanted = self._wanted["event"]
        if span := wanted.next_range():
            events = source.events(span[0] - 1, min(_EVENTS_A_TURN, span[1] - span[0] + 1))
            for event in events:
                await self._send_event(client, event)
                self._count(resent=1)
                wanted.sent(event.id)
            if not events:
                wanted.nothing_left()
        return any(replay.next_range() for replay in self._wanted.values())

    async def _send_event(self, client: aiomqtt.Client, event: EventRecord) -> None:
        await self._send(client, EventMessage.of(event, night=self._night, rig=self._rig))
        if event.kind in self._alarm_kinds:
            await self._send(client, AlarmMessage.of(event, night=self._night, rig=self._rig))

    async def _send_state(self, client: aiomqtt.Client, source: NightSource) -> None:
        state = self._state
        await self._send(client, self._state_message(source, state), retain=True)
        self._state_sent, self._state_sent_s = state, time.monotonic()

    def _state_message(self, source: NightSource, state: NightState) -> StateMessage:
        self._state_seq += 1
        return StateMessage(
            night=self._night,
            rig=self._rig,
            seq=self._state_seq,
            state=state,
            last_reading=source.last_number(),
            last_event=source.last_event_id(),
        )

    def _batch(self, readings: Sequence[Reading], source: NightSource) -> ReadingBatch:
        return ReadingBatch.of(readings, source.channels(), night=self._night, rig=self._rig)

    async def _send(self, client: aiomqtt.Client, message: Message, retain: bool = False) -> None:
        """Returns when the broker has acknowledged."""
        kind, payload = encode(message)
        await client.publish(topic_of(self._rig, kind), payload, qos=1, retain=retain)

    async def _listen(self, client: aiomqtt.Client) -> None:
        async for arrived in client.messages:
            try:
                message = decode(str(arrived.topic), arrived.payload)
            except MessageError:
                self._count(garbage=1)
                continue
            if message.night != self._night or message.rig != self._rig:
                self._count(foreign=1)
            elif isinstance(message, WantedMessage):
                self._wanted[message.what].want(message.first, message.last)
            elif isinstance(message, FindingMessage):
                self._keep_finding(message)

    def _keep_finding(self, message: FindingMessage) -> None:
        while True:
            try:
                self._findings.put_nowait(message)
                return
            except queue.Full:
                try:
                    self._findings.get_nowait()
                    self._count(findings_dropped=1)
                except queue.Empty:
                    pass

    def _count(self, last_error: str = "", **more: int) -> None:
        """Only the publisher's thread counts, so that a reader sees a whole set of counts."""
        counted = {name: getattr(self._counts, name) + by for name, by in more.items()}
        kept = last_error or self._counts.last_error
        self._counts = replace(self._counts, last_error=kept, **counted)
