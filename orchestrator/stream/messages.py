"""The messages of the stream and their JSON.

Every message names version, night, rig, kind and sequence number. Values that are not finite are
null on the wire and NaN in a reading. What does not decode raises `MessageError`, whatever it is:
the payload may come from anyone who can reach the broker.
"""

import math
from collections.abc import Sequence
from typing import Annotated, Any, Literal, Self

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    JsonValue,
    ValidationError,
    model_validator,
)

from orchestrator.ledger.records import EventRecord
from orchestrator.ledger.schema import instruments_of, plain_json
from orchestrator.readings import Channel, Reading

ROOT = "nightfield"
LARGEST_PAYLOAD_BYTES = 4_000_000
MOST_READINGS = 1000  # in one message
LOST = "lost"  # the outcome that the last will announces

Kind = Literal["state", "reading", "event", "alarm", "finding", "wanted"]
KINDS: tuple[Kind, ...] = ("state", "reading", "event", "alarm", "finding", "wanted")


class MessageError(ValueError):
    """Topic or payload is not a message of this stream; the message says why."""


def _finite_or_none(value: Any) -> Any:
    return None if isinstance(value, float) and not math.isfinite(value) else value


Value = float | None
FiniteOrNone = Annotated[float | None, BeforeValidator(_finite_or_none)]
JsonObject = Annotated[dict[str, JsonValue], BeforeValidator(plain_json)]
Row = tuple[int, float, float, str, tuple[Value, ...], tuple[Value, ...]]

_STRICT = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


class _Message(BaseModel):
    """What every message has. ``seq`` counts within a kind; see each kind for what it counts."""

    model_config = _STRICT

    version: Literal[1] = 1
    night: str = Field(min_length=1, max_length=200)
    rig: str = Field(min_length=1, max_length=200)
    seq: int = Field(ge=0)


class NightState(BaseModel):
    """What the night says of itself now.

    Attributes
    ----------
    step : str
        Name of the running step.
    step_number, step_count : int
        Which of how many, from 1; 0 before the first.
    progress : float or None
        Part of the night that is done, 0 to 1.
    expected_end_unix_s : float or None
        Wall time at which the forecast sees the end.
    outcome : str
        ``"running"`` or how the night ended; ``"lost"`` is said by the broker when the night's
        process has vanished.
    trips : tuple of str
        Names of the trips that stand, worst first.
    margins : dict
        Interlock to margin, 1 at rest and 0 at the trip; None where unknown.
    data : dict
        Anything else worth showing, as JSON.
    """

    model_config = _STRICT

    step: str = ""
    step_number: int = Field(default=0, ge=0)
    step_count: int = Field(default=0, ge=0)
    progress: FiniteOrNone = None
    expected_end_unix_s: FiniteOrNone = None
    outcome: str = "running"
    trips: tuple[str, ...] = ()
    margins: dict[str, FiniteOrNone] = Field(default_factory=dict)
    data: JsonObject = Field(default_factory=dict)


class StateMessage(_Message):
    """The night's state, retained by the broker; ``seq`` counts the states sent.

    ``last_reading`` and ``last_event`` are what the ledger held then, so that a subscriber sees
    that the newest messages did not arrive.
    """

    kind: Literal["state"] = "state"
    state: NightState
    last_reading: int = Field(default=0, ge=0)
    last_event: int = Field(default=0, ge=0)


class ReadingBatch(_Message):
    """Consecutive readings, without gaps from ``first`` to ``last``; ``seq`` is ``last``."""

    kind: Literal["reading"] = "reading"
    first: int = Field(ge=1)
    last: int = Field(ge=1)
    channels: tuple[tuple[str, str, str], ...]
    rows: tuple[Row, ...] = Field(min_length=1, max_length=MOST_READINGS)

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        if len({name for name, _, _ in self.channels}) != len(self.channels):
            raise ValueError("two channels have one name")
        values = len(self.channels)
        instruments = len({instrument for _, _, instrument in self.channels})
        for number, row in enumerate(self.rows, self.first):
            if row[0] != number or len(row[4]) != values or len(row[5]) != instruments:
                raise ValueError(f"row {row[0]} does not fit in its place, {number}")
        if self.last != self.rows[-1][0] or self.seq != self.last:
            raise ValueError(f"last is {self.last}, but the last row is {self.rows[-1][0]}")
        return self

    @classmethod
    def of(
        cls, readings: Sequence[Reading], channels: Sequence[Channel], *, night: str, rig: str
    ) -> Self:
        """A batch of consecutive readings, at least one and at most `MOST_READINGS`."""
        names = [channel.name for channel in channels]
        instruments = instruments_of(channels)
        rows = tuple(
            (
                reading.number,
                reading.time_s,
                reading.unix_s,
                reading.step,
                tuple(_finite(reading.values.get(name)) for name in names),
                tuple(_finite(reading.taken_s.get(instrument)) for instrument in instruments),
            )
            for reading in readings
        )
        return cls(
            night=night,
            rig=rig,
            seq=readings[-1].number,
            first=readings[0].number,
            last=readings[-1].number,
            channels=tuple((c.name, c.unit, c.instrument) for c in channels),
            rows=rows,
        )

    def of_channels(self) -> tuple[Channel, ...]:
        """The channels, in the order of the values."""
        return tuple(Channel(*entry) for entry in self.channels)

    def readings(self) -> list[Reading]:
        """The rows as readings; null is NaN, and a silent instrument is absent in ``taken_s``."""
        names = [name for name, _, _ in self.channels]
        instruments = tuple(dict.fromkeys(instrument for _, _, instrument in self.channels))
        return [
            Reading(
                number,
                time_s,
                unix_s,
                step,
                {n: math.nan if v is None else v for n, v in zip(names, values, strict=True)},
                {i: t for i, t in zip(instruments, taken, strict=True) if t is not None},
            )
            for number, time_s, unix_s, step, values, taken in self.rows
        ]


class EventMessage(_Message):
    """One event of the ledger; ``seq`` is its id there."""

    kind: Literal["event", "alarm"] = "event"
    time_s: float
    unix_s: float
    event_kind: str
    name: str
    severity: str
    text: str
    data: JsonObject = Field(default_factory=dict)

    @classmethod
    def of(cls, event: EventRecord, *, night: str, rig: str) -> Self:
        """The message that tells of a ledger's event."""
        return cls(
            night=night,
            rig=rig,
            seq=event.id,
            time_s=event.time_s,
            unix_s=event.unix_s,
            event_kind=event.kind,
            name=event.name,
            severity=event.severity,
            text=event.text,
            data=dict(event.data),
        )


class AlarmMessage(EventMessage):
    """An event that wants a person's attention, once more on a topic of its own."""

    kind: Literal["alarm"] = "alarm"


class FindingMessage(_Message):
    """What the analyst holds to be true now: ``data`` has the list of orbits. ``seq`` counts."""

    kind: Literal["finding"] = "finding"
    source: str = Field(min_length=1, max_length=200)
    data: JsonObject


class WantedMessage(_Message):
    """A subscriber's wish to be sent again what it missed, both ends included."""

    kind: Literal["wanted"] = "wanted"
    what: Literal["reading", "event"]
    first: int = Field(ge=1)
    last: int = Field(ge=1)

    @model_validator(mode="after")
    def _ordered(self) -> Self:
        if self.last < self.first:
            raise ValueError(f"wanted from {self.first} to {self.last}")
        return self


Message = StateMessage | ReadingBatch | EventMessage | AlarmMessage | FindingMessage | WantedMessage

_MODELS: dict[str, type[_Message]] = {
    "state": StateMessage,
    "reading": ReadingBatch,
    "event": EventMessage,
    "alarm": AlarmMessage,
    "finding": FindingMessage,
    "wanted": WantedMessage,
}


def topic_of(rig: str, kind: str) -> str:
    """The topic of a rig's messages of one kind.

    Raises
    ------
    MessageError
        The rig's name is empty or has a character that MQTT gives a meaning (MQTT 3.1.1, 4.7).
    """
    if not rig or any(character in rig for character in "/+#\0"):
        raise MessageError(f"rig name {rig!r} cannot be part of a topic: no /, +, # or NUL")
    return f"{ROOT}/{rig}/{kind}"


def encode(message: Message) -> tuple[Kind, bytes]:
    """Kind, which is the last level of the topic, and payload of a message."""
    return message.kind, message.model_dump_json().encode()


def decode(topic: str, payload: object) -> Message:
    """The message in a payload.

    Parameters
    ----------
    topic : str
        The topic it came by; rig and kind in the payload must agree with it.
    payload : object
        What came; only bytes are taken.

    Raises
    ------
    MessageError
        Unknown topic, not JSON, not this version, fields missing, unknown, or out of range.
    """
    parts = topic.split("/")
    if len(parts) != 3 or parts[0] != ROOT or parts[2] not in _MODELS:
        raise MessageError(f"topic {topic[:200]!r} is not one of the stream's")
    if not isinstance(payload, bytes | bytearray):
        raise MessageError(f"payload on {topic} is not bytes")
    if len(payload) > LARGEST_PAYLOAD_BYTES:
        raise MessageError(
            f"payload on {topic} has {len(payload)} bytes; at most {LARGEST_PAYLOAD_BYTES} are read"
        )
    try:
        message = _MODELS[parts[2]].model_validate_json(bytes(payload), strict=True)
    except ValidationError as error:
        first = error.errors(include_url=False, include_input=False, include_context=False)[0]
        where = ".".join(str(part) for part in first["loc"])
        raise MessageError(f"payload on {topic}: {where} {first['msg']}") from None
    except (ValueError, RecursionError) as error:
        raise MessageError(f"payload on {topic} cannot be read: {error}") from None
    if message.rig != parts[1] or getattr(message, "kind", None) != parts[2]:
        raise MessageError(f"payload on {topic} says that it is of another rig or kind")
    assert isinstance(message, Message)
    return message


def _finite(value: float | None) -> float | None:
    return None if value is None or not math.isfinite(value) else value
