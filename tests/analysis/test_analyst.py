"""The analyst finds what the sweeps hold, in any order of messages, and nothing breaks it."""

import asyncio
import json
import random
import subprocess
import sys
import time
from collections.abc import Awaitable, Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from orchestrator.analysis import analyst as analyst_module
from orchestrator.analysis.analyst import Analyst, find_in_ledger
from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.records import NightDescription
from orchestrator.ledger.writing import Ledger
from orchestrator.readings import Reading
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.broker import start_broker_process
from orchestrator.stream.local import LocalStream
from orchestrator.stream.messages import (
    EventMessage,
    FindingMessage,
    Message,
    NightState,
    ReadingBatch,
    StateMessage,
)
from orchestrator.stream.publisher import Publisher
from tests.analysis.nights import (
    BEFORE,
    CHANNELS,
    HALL_OHM_PER_T,
    NAN,
    batches,
    event_messages,
    night_events,
    night_readings,
    two_orbit_sweeps,
)
from tests.analysis.simulated import HEAVY, LIGHT

SWEEPS = two_orbit_sweeps()
READINGS = night_readings(SWEEPS)
EVENTS = night_events(SWEEPS)


def through_a_stream(messages: list[Message]) -> list[dict[str, Any]]:
    """What an analyst says to messages that went through JSON."""
    analyst, said = Analyst(), []
    stream = LocalStream()
    stream.subscribe(lambda message: said.extend(analyst.take(message)))
    for message in messages:
        stream.publish(message)
    json.dumps(said, allow_nan=False)
    return said


def assert_both_orbits(finding: dict[str, Any], sigmas: float = 5.0) -> None:
    """Frequency, mass and Dingle temperature within their errors."""
    assert len(finding["orbits"]) == 2, finding
    for orbit, truth in zip(finding["orbits"], (LIGHT, HEAVY), strict=True):
        for name in ("frequency_t", "mass", "dingle_k"):
            sd = orbit[name.replace("_", "_sd_") if "_" in name else f"{name}_sd"]
            assert abs(orbit[name] - getattr(truth, name)) < sigmas * sd, (name, orbit)
        assert orbit["signal_to_noise"] > 20


def test_each_finished_sweep_gives_a_finding_about_the_whole_ladder() -> None:
    """The first alone gives frequencies, both together mass and Dingle temperature, and Hall."""
    first_part = list(batches(READINGS[: BEFORE + SWEEPS[0].time_s.size]))
    second_part = list(batches(READINGS))[len(first_part) - 1 :]
    events = event_messages(EVENTS)
    said = through_a_stream([*events[:2], *first_part, *events[2:4], *second_part, *events[4:]])
    assert [(one["after"], one["sweeps"], one["problem"]) for one in said] == [
        ("sweep-1", 1, ""),
        ("sweep-2", 2, ""),
    ]
    assert [round(orbit["frequency_t"]) for orbit in said[0]["orbits"]] == [410, 1130]
    assert said[0]["orbits"][0]["mass"] is None
    assert_both_orbits(said[1])
    # 1 / (e |slope|), from the definition of the Hall coefficient of one kind of carrier.
    density = 1 / (1.602176634e-19 * abs(HALL_OHM_PER_T))
    hall = said[1]["hall"]
    assert abs(hall["density_m2"] - density) < 5 * hall["density_sd_m2"]
    assert hall["mobility_m2_per_vs"] is None


def test_order_between_readings_and_events_does_not_matter() -> None:
    """All events first, all readings first, or a shuffle that keeps each kind's own order."""
    readings: list[Message] = list(batches(READINGS))
    events: list[Message] = list(event_messages(EVENTS))
    last = {json.dumps(through_a_stream([*events, *readings])[-1])}
    last.add(json.dumps(through_a_stream([*readings, *events])[-1]))
    generator = random.Random(3)
    which = [True] * len(readings) + [False] * len(events)
    generator.shuffle(which)
    left = {True: iter(readings), False: iter(events)}
    last.add(json.dumps(through_a_stream([next(left[one]) for one in which])[-1]))
    assert len(last) == 1
    assert json.loads(last.pop())["sweeps"] == 2


def test_field_is_taken_at_the_time_at_which_the_lock_in_answered() -> None:
    """Lock-ins that answer half a second after the magnet do not shift the oscillations' phase."""
    readings = night_readings(SWEEPS, late_s=0.5)
    messages: list[Message] = [*event_messages(EVENTS), *batches(readings)]
    straight = through_a_stream([*event_messages(EVENTS), *batches(READINGS)])[-1]
    late = through_a_stream(messages)[-1]
    assert_both_orbits(late)
    for one, other in zip(straight["orbits"], late["orbits"], strict=True):
        assert abs(one["beta"] - other["beta"]) < 3 * one["beta_sd"]


def damaged(one: Reading, **values: float) -> Reading:
    return replace(one, values={**one.values, **values})


def test_missing_and_overloaded_rows_are_left_out() -> None:
    """A tenth of the rows without temperature, field or voltage, or far off while overloaded."""
    generator = random.Random(4)
    readings = list(READINGS)
    for at in generator.sample(range(len(readings)), len(readings) // 10):
        bad = generator.choice(
            [
                {"rxx_x_v": 1.0, "rxx_overload": 1.0},
                {"rxx_x_v": NAN, "rxx_overload": NAN},
                {"field_t": NAN},
                {"sample_k": NAN},
                {"rxy_x_v": 1.0, "rxy_overload": 1.0},
            ]
        )
        readings[at] = damaged(readings[at], **bad)
        if "field_t" in bad:
            taken = {k: v for k, v in readings[at].taken_s.items() if k != "magnet"}
            readings[at] = replace(readings[at], taken_s=taken)
    (finding,) = through_a_stream([*event_messages(EVENTS), *batches(readings, 1000)])[-1:]
    assert_both_orbits(finding)
    assert finding["hall"] is not None
    assert finding["problem"] == ""


def test_a_sweep_that_cannot_be_analysed_does_not_take_the_others_with_it() -> None:
    """The second sweep is overloaded throughout; the finding says so and keeps the first."""
    begin = BEFORE + SWEEPS[0].time_s.size
    readings = READINGS[:begin] + [damaged(one, rxx_overload=1.0) for one in READINGS[begin:]]
    (finding,) = through_a_stream([*event_messages(EVENTS), *batches(readings)])[-1:]
    assert (finding["after"], finding["sweeps"]) == ("sweep-2", 1)
    assert (
        finding["problem"] == f'sweep "sweep-2": 0 of {SWEEPS[1].time_s.size} readings can be used'
    )
    assert [round(orbit["frequency_t"]) for orbit in finding["orbits"]] == [410, 1130]


def test_overloaded_hall_lock_in_is_told_and_spoils_nothing_else() -> None:
    """As when its range is too small for the field; the orbits stand."""
    readings = [damaged(one, rxy_overload=1.0) for one in READINGS]
    (finding,) = through_a_stream([*event_messages(EVENTS), *batches(readings)])[-1:]
    assert_both_orbits(finding)
    assert finding["hall"] is None
    size = SWEEPS[0].time_s.size
    text = f'Hall: sweep "sweep-1": rxy overloaded or silent in {size} of {size}'
    assert finding["problem"].startswith(text)


def test_analysis_that_fails_is_a_finding_without_orbits(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whatever the numerics raise."""

    def failing(sweeps: object) -> None:
        raise ZeroDivisionError("by nought")

    monkeypatch.setattr(analyst_module, "analyse_ladder", failing)
    (finding,) = through_a_stream([*event_messages(EVENTS), *batches(READINGS)])[-1:]
    assert finding["orbits"] == []
    assert finding["problem"] == "ZeroDivisionError: by nought"


def test_garbage_neither_raises_nor_stops_what_comes_after() -> None:
    """Events that lie about everything, before and between good ones."""

    def event(kind: str, name: str, **data: Any) -> EventMessage:
        return EventMessage(
            night="one",
            rig="cellar",
            seq=1,
            time_s=0.0,
            unix_s=0.0,
            event_kind=kind,
            name=name,
            severity="info",
            text="",
            data=data,
        )

    ended = {"phase": "finished", "type": "field-sweep"}
    bad: list[Message] = [
        event("night", "started", lock_ins=7),
        event("night", "started", lock_ins=[3, {"name": "rxx", "measures": "longitudinal"}]),
        event("step", "a", **ended),
        event("step", "b", **ended, first_reading="1", last_reading=True),
        event("step", "c", **ended, first_reading=1e300, last_reading=2e300),
        event("step", "d", **ended, first_reading=90, last_reading=3),
        event("step", "e", **ended, first_reading=1, last_reading=10**12),
        event("plan", "f", orbits=[["frequency"]], legs=None),
        FindingMessage(night="one", rig="cellar", seq=1, source="else", data={"orbits": "none"}),
    ]
    assert through_a_stream(bad) == []
    said = through_a_stream([*bad, *event_messages(EVENTS), *bad[2:], *batches(READINGS)])
    assert_both_orbits(said[-1])
    strange = ReadingBatch.of(
        [Reading(1, 0.0, 0.0, "", {"x": 1.0}, {})], CHANNELS[:1], night="two", rig="cellar"
    )
    sweep = event("step", "g", **ended, first_reading=1, last_reading=1)
    (finding,) = through_a_stream([strange, sweep.model_copy(update={"night": "two"})])
    assert finding["problem"] == 'sweep "g": the night named no longitudinal lock-in'


def test_another_night_begins_anew_and_old_readings_are_let_go() -> None:
    """The second night's finding knows one sweep, and readings are kept only until their cut."""
    analyst = Analyst()
    messages: list[Message] = [*event_messages(EVENTS), *batches(READINGS)]
    for message in messages:
        analyst.collect(message)
    assert len(analyst._gathering._numbers) == 0
    size = BEFORE + SWEEPS[0].time_s.size
    second: list[Message] = [*event_messages(EVENTS[:3]), *batches(READINGS[:size])]
    for message in second:
        moved = message.model_copy(update={"night": "two"})
        assert isinstance(moved, Message)
        analyst.collect(moved)
    task = analyst.due()
    assert task is not None
    assert (task.night, len(task.sweeps)) == ("two", 1)
    assert analyst.due() is None


def test_an_analyst_that_came_late_analyses_once_when_it_has_caught_up() -> None:
    """The state says what the ledger holds; until that is here, nothing is analysed."""
    analyst = Analyst()
    analyst.collect(
        StateMessage(
            night="one", rig="cellar", seq=1, state=NightState(), last_reading=len(READINGS)
        )
    )
    dues = []
    messages: list[Message] = [*event_messages(EVENTS), *batches(READINGS)]
    for message in messages:
        analyst.collect(message)
        if task := analyst.due():
            dues.append(len(task.sweeps))
    assert dues == [2]


def write_ledger(folder: Path, readings: list[Reading] = READINGS) -> Ledger:
    """A ledger of the night; its writer is left open."""
    ledger = Ledger.create(
        folder,
        description=NightDescription("one", "cellar", "ladder", "rehearsal", 1.9e9, "0"),
        channels=CHANNELS,
        commit="batched",
        clock=time.monotonic,
        wall=time.time,
    )
    for one in readings:
        ledger.append_reading(one)
    for event in EVENTS:
        ledger.append_event(kind=event.kind, name=event.name, data=event.data)
    ledger.commit()
    return ledger


def test_ledger_gives_what_the_messages_gave(tmp_path: Path) -> None:
    """To the last digit; and a ledger without sweeps says so."""
    write_ledger(tmp_path / "one").close()
    said = through_a_stream([*event_messages(EVENTS), *batches(READINGS)])
    assert find_in_ledger(tmp_path / "one") == said[-1]
    write_ledger(tmp_path / "two", []).close()
    nothing = find_in_ledger(tmp_path / "two")
    assert (nothing["orbits"], nothing["sweeps"]) == ([], 0)
    assert nothing["problem"] == "no field sweep has finished"


def run(scene: Callable[[], Awaitable[None]]) -> None:
    """Run a scene on a selector loop, which aiomqtt needs on Windows."""
    with asyncio.Runner(loop_factory=asyncio.SelectorEventLoop) as runner:

        async def whole() -> None:
            await scene()

        runner.run(whole())


def start_analyst(port: int) -> "subprocess.Popen[bytes]":
    """The analyst's process, as a night starts it."""
    options = ["--broker", f"127.0.0.1:{port}", "--rig", "cellar"]
    return subprocess.Popen(
        [sys.executable, "-m", "orchestrator.analysis.analyst", *options],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )


def test_analyst_process_finds_over_the_broker_and_again_after_it_was_killed(
    tmp_path: Path,
) -> None:
    """Real broker, real publisher, real analyst; a new analyst sends the finding again."""
    ledger = write_ledger(tmp_path)

    async def next_finding(publisher: Publisher) -> FindingMessage:
        end_s = time.monotonic() + 20.0
        while not (found := publisher.take_findings()):
            assert time.monotonic() < end_s, "no finding came"
            await asyncio.sleep(0.05)
        return found[-1]

    async def scene() -> None:
        with start_broker_process() as broker:
            address = BrokerAddress(port=broker.port)
            publisher = Publisher(
                address, rig="cellar", night="one", open_source=lambda: NightReader(tmp_path)
            )
            publisher.start()
            first = start_analyst(broker.port)
            finding = await next_finding(publisher)
            assert finding.source == "analyst"
            assert_both_orbits(dict(finding.data))
            first.kill()
            first.communicate()
            second = start_analyst(broker.port)
            again = await next_finding(publisher)
            assert again.data == finding.data
            said = second.communicate(timeout=3.0)  # closes its input
            assert second.returncode == 0
            assert said == (b"", b"")
            publisher.stop()

    run(scene)
    ledger.close()
