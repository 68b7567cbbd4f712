"""A screen fed from a night's folder and from a real broker, and what it prints in the end."""

import asyncio
import io
import time
from collections.abc import AsyncIterator, Awaitable, Callable
from pathlib import Path

import pytest
from rich.console import Console

from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.records import NightDescription
from orchestrator.ledger.schema import LedgerError
from orchestrator.ledger.writing import Ledger
from orchestrator.screen.picture import Picture
from orchestrator.screen.sources import from_broker, from_folder, watch, watch_until_end
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.broker import start_broker_process
from orchestrator.stream.messages import (
    EventMessage,
    FindingMessage,
    Message,
    NightState,
    ReadingBatch,
)
from orchestrator.stream.publisher import Publisher
from tests.screen.scenes import CHANNELS, MARGINS, NIGHT, RIG, START_UNIX_S, Scene, sweeping


def run(scene: Callable[[], Awaitable[None]]) -> None:
    """Run a scene on a selector loop, which aiomqtt needs on Windows."""
    with asyncio.Runner(loop_factory=asyncio.SelectorEventLoop) as runner:

        async def whole() -> None:
            await scene()

        runner.run(whole())


class Writing:
    """A ledger into which a scene's messages are written at the scene's times."""

    def __init__(self, folder: Path, broker: str | None = None) -> None:
        self.now_s = 0.0
        self.ledger = Ledger.create(
            folder,
            description=NightDescription(
                NIGHT, RIG, "ladder", "rehearsal", START_UNIX_S, "0", broker=broker
            ),
            channels=CHANNELS,
            commit="batched",
            clock=lambda: self.now_s,
            wall=lambda: START_UNIX_S + self.now_s,
        )

    def write(self, messages: list[Message]) -> None:
        for message in messages:
            if isinstance(message, ReadingBatch):
                for reading in message.readings():
                    self.ledger.append_reading(reading)
            elif isinstance(message, EventMessage):
                self.now_s = message.time_s
                self.ledger.append_event(
                    kind=message.event_kind,
                    name=message.name,
                    severity=message.severity,
                    text=message.text,
                    data=message.data,
                )
            elif isinstance(message, FindingMessage):
                self.ledger.append_finding(source=message.source, data=message.data)
        self.ledger.commit()


def a_console() -> tuple[Console, io.StringIO]:
    file = io.StringIO()
    return Console(file=file, width=100), file


def ending(scene: Scene) -> Scene:
    scene.event("night", "ended", "done", outcome="done", parked="parked")
    return scene


def test_finished_night_is_printed_once_in_plain_text(tmp_path: Path) -> None:
    """A console that is no terminal gets one frame without a single escape sequence."""
    writing = Writing(tmp_path)
    writing.write(ending(sweeping()).messages)
    writing.ledger.close()
    console, file = a_console()

    async def scene() -> None:
        await watch(from_folder(tmp_path), console)

    run(scene)
    text = file.getvalue()
    assert text.count("NIGHT OVER") == 1
    assert text.count("F 410.021 ± 0.012 T") == 1
    assert "\x1b" not in text


def test_growing_ledger_is_followed_to_its_end(tmp_path: Path) -> None:
    """What is written while the screen looks on arrives, in pieces, each reading once."""
    writing, told = Writing(tmp_path), ending(sweeping()).messages
    heard: list[Message] = []

    async def scene() -> None:
        writing.write(told[:3])

        async def listen() -> None:
            async for message in from_folder(tmp_path, poll_s=0.02):
                heard.append(message)

        listening = asyncio.create_task(listen())
        for at in range(3, len(told), 4):
            await asyncio.sleep(0.05)
            writing.write(told[at : at + 4])
        await asyncio.wait_for(listening, timeout=5.0)

    run(scene)
    writing.ledger.close()
    numbers = [row[0] for one in heard if isinstance(one, ReadingBatch) for row in one.rows]
    assert numbers == list(range(1, 2461))
    events = [one.seq for one in heard if isinstance(one, EventMessage)]
    assert events == list(range(1, 7))
    assert sum(isinstance(one, FindingMessage) for one in heard) == 1


def test_folder_without_a_ledger_is_refused(tmp_path: Path) -> None:
    """With the ledger's own words."""

    async def scene() -> None:
        await watch(from_folder(tmp_path), a_console()[0])

    with pytest.raises(LedgerError, match="no ledger"):
        run(scene)


def test_one_look_at_a_running_night_does_not_wait_for_its_end(tmp_path: Path) -> None:
    """The frame of now, within a few seconds."""
    writing = Writing(tmp_path)
    writing.write(sweeping().messages)
    console, file = a_console()
    begun_s = time.monotonic()

    async def scene() -> None:
        await watch_until_end(from_folder(tmp_path), console, once=True)

    run(scene)
    assert time.monotonic() - begun_s < 60.0
    assert "sweep-1: sweep from 3 to 12 T at 1.5 K" in file.getvalue()
    writing.ledger.close()


def test_terminal_is_drawn_again_and_again_and_left_as_it_was() -> None:
    """Several frames on the other screen, then back, with the last frame left to read."""
    told = ending(sweeping()).messages
    file = io.StringIO()
    console = Console(
        file=file, width=80, height=24, force_terminal=True, _environ={"TERM": "xterm"}
    )

    async def slowly() -> AsyncIterator[Message]:
        for message in told:
            yield message
            await asyncio.sleep(0.02)

    async def scene() -> None:
        await watch(slowly(), console, refresh_s=0.05)

    run(scene)
    text = file.getvalue()
    assert text.count("ALL IS WELL") + text.count("NO NEWS") >= 2
    assert "\x1b[?1049h" in text
    assert text.index("\x1b[?1049l") < text.rindex("NIGHT OVER")


def test_broker_brings_all_that_came_before_and_the_margins(tmp_path: Path) -> None:
    """Real broker and publisher; a screen that comes late has the sweep from its beginning."""
    writing = Writing(tmp_path)
    writing.write(sweeping().messages)
    pictures: list[Picture] = []

    async def scene() -> None:
        with start_broker_process() as broker:
            address = BrokerAddress(port=broker.port)
            publisher = Publisher(
                address, rig=RIG, night=NIGHT, open_source=lambda: NightReader(tmp_path)
            )
            publisher.update(NightState(step="sweep-1", margins=MARGINS))
            publisher.start()
            pictures.append(await watch(from_broker(address, RIG), a_console()[0], once=True))
            publisher.stop()

    run(scene)
    writing.ledger.close()
    (picture,) = pictures
    assert picture.newest is not None
    assert picture.newest.number == 2460
    assert picture.state is not None
    assert picture.state.margins == MARGINS
    trace = picture.sweep_trace()
    assert trace is not None
    assert len(trace[1]) == 1800


def test_folder_takes_the_margins_from_the_nights_own_broker(tmp_path: Path) -> None:
    """And does without where there is none: the broker is gone, or not on this machine."""
    margins: list[object] = []

    async def look(folder: Path) -> None:
        picture = await watch(from_folder(folder), a_console()[0], once=True)
        assert picture.newest is not None
        assert picture.newest.number == 2460
        margins.append(picture.state.margins if picture.state else None)

    async def scene() -> None:
        with start_broker_process() as broker:
            writing = Writing(tmp_path / "with", f"127.0.0.1:{broker.port}")
            writing.write(sweeping().messages)
            publisher = Publisher(
                BrokerAddress(port=broker.port),
                rig=RIG,
                night=NIGHT,
                open_source=lambda: NightReader(tmp_path / "with"),
            )
            publisher.update(NightState(step="sweep-1", margins=MARGINS))
            publisher.start()
            end_s = time.monotonic() + 5
            while publisher.counts.readings < 2460:
                assert time.monotonic() < end_s
                await asyncio.sleep(0.05)
            await look(tmp_path / "with")
            publisher.stop()
        await look(tmp_path / "with")
        far = Writing(tmp_path / "far", "measure.example:1883")
        far.write(sweeping().messages)
        await look(tmp_path / "far")
        for one in (writing, far):
            one.ledger.close()

    run(scene)
    assert margins == [MARGINS, None, None]
