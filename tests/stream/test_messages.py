"""Messages survive their bytes, and what is no message is a MessageError and nothing else."""

import contextlib
import json
import math
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from orchestrator.ledger.records import EventRecord
from orchestrator.stream.address import AddressError, BrokerAddress
from orchestrator.stream.local import LocalStream
from orchestrator.stream.messages import (
    KINDS,
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
from tests.ledger.invented import CHANNELS, reading

EVENT = EventRecord(3, 12.5, 1.9e9, "trip", "stage_silent", "high", "no answer", {"age_s": 3.0})

MESSAGES: list[Message] = [
    StateMessage(
        night="n",
        rig="cellar",
        seq=4,
        state=NightState(
            step="up", step_number=1, step_count=9, trips=("quench",), margins={"quench": 0.0}
        ),
        last_reading=12,
    ),
    ReadingBatch.of([reading(n) for n in range(5, 9)], CHANNELS, night="n", rig="cellar"),
    EventMessage.of(EVENT, night="n", rig="cellar"),
    AlarmMessage.of(EVENT, night="n", rig="cellar"),
    FindingMessage(night="n", rig="cellar", seq=1, source="a", data={"orbits": [{"mass": None}]}),
    WantedMessage(night="n", rig="cellar", seq=1, what="reading", first=2, last=9),
]


@pytest.mark.parametrize("message", MESSAGES, ids=KINDS)
def test_message_survives_its_bytes(message: Message) -> None:
    """Each kind, under its own topic and under no other."""
    kind, payload = encode(message)
    assert decode(topic_of("cellar", kind), payload) == message
    for other in {*KINDS, "command"} - {kind}:
        with pytest.raises(MessageError):
            decode(f"nightfield/cellar/{other}", payload)
    with pytest.raises(MessageError, match="of another rig"):
        decode(topic_of("attic", kind), payload)


def test_readings_survive_to_the_last_bit_and_nan_is_null() -> None:
    """A silent instrument stays silent; floats come back as the same floats."""
    sent = [
        replace(reading(n), values={**reading(n).values, "field_t": math.pi * 10.0**-n})
        for n in range(1, 15)
    ]
    _, payload = encode(ReadingBatch.of(sent, CHANNELS, night="n", rig="cellar"))
    assert json.loads(payload)["rows"][6][4][2] is None
    batch = decode("nightfield/cellar/reading", payload)
    assert isinstance(batch, ReadingBatch)
    assert batch.of_channels() == CHANNELS
    for one, back in zip(sent, batch.readings(), strict=True):
        assert (back.number, back.time_s, back.unix_s, back.step, back.taken_s) == (
            one.number,
            one.time_s,
            one.unix_s,
            one.step,
            one.taken_s,
        )
        assert math.isnan(back.values["sample_k"]) == (one.number % 7 == 0)
        assert back.values["field_t"] == one.values["field_t"]


def test_numbers_that_are_not_finite_become_null_in_states_and_findings() -> None:
    """A margin that is not known does not keep the state from being told."""
    state = NightState(progress=math.nan, margins={"level": math.inf}, data={"x": [math.nan]})
    _, payload = encode(StateMessage(night="n", rig="cellar", seq=0, state=state))
    told = json.loads(payload)["state"]
    assert (told["progress"], told["margins"], told["data"]) == (
        None,
        {"level": None},
        {"x": [None]},
    )
    finding = FindingMessage(night="n", rig="cellar", seq=0, source="a", data={"sd": math.nan})
    assert json.loads(encode(finding)[1])["data"] == {"sd": None}


def changed(message: Message, **more: Any) -> bytes:
    return json.dumps({**json.loads(encode(message)[1]), **more}).encode()


@pytest.mark.parametrize(
    "payload",
    [
        b"",
        b"\xff\xfe",
        b"null",
        b"[]",
        b"NaN",
        b"{" * 100_000,
        b"[" * 1_000_000,
        b'{"version": 1}',
        b" " * 4_000_001,
        changed(MESSAGES[1], version=2),
        changed(MESSAGES[1], extra=1),
        changed(MESSAGES[1], rows=[]),
        changed(MESSAGES[1], first=6),
        changed(MESSAGES[1], last=10**40),
        changed(MESSAGES[1], seq="8"),
        changed(MESSAGES[1], channels=[]),
        changed(MESSAGES[1], channels=[["a", "V", "x"]] * 4),
        changed(MESSAGES[1], rig="../attic"),
        encode(MESSAGES[1])[1].replace(b"null", b"NaN").replace(b"1.5", b"Infinity"),
    ],
    ids=lambda payload: repr(payload[:30]),
)
def test_garbage_is_a_message_error_on_every_topic(payload: bytes) -> None:
    """Nothing else is ever raised, and nothing is let through."""
    for kind in KINDS:
        with pytest.raises(MessageError):
            decode(topic_of("cellar", kind), payload)


@settings(max_examples=300, deadline=None)
@given(st.sampled_from(MESSAGES), st.data())
def test_damaged_message_decodes_or_is_a_message_error(
    message: Message, data: st.DataObject
) -> None:
    """Bytes cut, changed or put in anywhere: never another exception, never another kind."""
    kind, payload = encode(message)
    at = data.draw(st.integers(0, len(payload)))
    length = data.draw(st.integers(0, 8))
    payload = payload[:at] + data.draw(st.binary(max_size=8)) + payload[at + length :]
    with contextlib.suppress(MessageError):
        assert decode(topic_of("cellar", kind), payload).kind == kind


@pytest.mark.parametrize(
    "topic",
    [
        "",
        "nightfield/cellar/command",
        "nightfield/cellar",
        "x/cellar/state",
        "nightfield/a/b/state",
    ],
)
def test_unknown_topic_is_refused(topic: str) -> None:
    """There is no topic by which a command could come (safety promise 9)."""
    with pytest.raises(MessageError, match="not one of the stream's"):
        decode(topic, encode(MESSAGES[0])[1])


@pytest.mark.parametrize("rig", ["", "a/b", "+", "#", "a\0"])
def test_rig_name_that_mqtt_would_misread_is_refused(rig: str) -> None:
    """MQTT 3.1.1, 4.7: separators and wildcards (from memory)."""
    with pytest.raises(MessageError, match="cannot be part of a topic"):
        topic_of(rig, "state")


def test_local_stream_delivers_the_same_messages_at_once() -> None:
    """In a rehearsal at full speed a subscriber gets what the wire would have brought."""
    stream, got = LocalStream(), list[Message]()
    stream.subscribe(got.append)
    for message in MESSAGES:
        stream.publish(message)
        assert got[-1] == message
        assert got[-1] is not message
    assert stream.sent == len(MESSAGES)


def test_broker_elsewhere_needs_password_and_tls_or_a_reason() -> None:
    """Safety promise 9, for the address of a broker that is not the embedded one."""
    for host in ("127.0.0.1", "localhost", "::1", "127.8.8.8"):
        assert BrokerAddress(host).loopback
    with pytest.raises(AddressError, match="no password and no TLS: give a password and TLS"):
        BrokerAddress("192.0.2.7")
    with pytest.raises(AddressError, match="has no TLS: give TLS"):
        BrokerAddress("broker.example", password="x")
    assert not BrokerAddress("192.0.2.7", password="x", tls=True).loopback
    assert BrokerAddress("192.0.2.7", why_open="a wire between two machines").port == 1883
    with pytest.raises(AddressError, match="port 0"):
        BrokerAddress(port=0)
