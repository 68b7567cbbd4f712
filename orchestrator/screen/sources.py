"""Where a screen's messages come from: a broker, or a night's folder; and the loop that shows them.

Both sources only read. The folder needs no broker, the broker no folder.
"""

import asyncio
import contextlib
import time
from collections.abc import AsyncGenerator, AsyncIterator, Callable
from pathlib import Path
from typing import Self

from rich.console import Console, RenderableType
from rich.live import Live

from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.records import NightDescription
from orchestrator.screen.dashboard import render
from orchestrator.screen.picture import Picture
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.messages import (
    EventMessage,
    FindingMessage,
    Message,
    ReadingBatch,
    StateMessage,
)
from orchestrator.stream.subscriber import Subscriber

_POLL_S = 0.5
_CHUNK = 500
_QUIET_S = 0.6  # a source that says nothing for so long has said what it had
_LONGEST_LOOK_S = 8.0
_PRINTED_HEIGHT = 40


async def from_broker(
    address: BrokerAddress, rig: str, *, night: str | None = None
) -> AsyncIterator[Message]:
    """A rig's messages over the network, the night's earlier ones included; never ends."""
    async for message in Subscriber(address, rig=rig, night=night, from_start=True):
        yield message


class _States:
    """The newest state of a night, from its broker on this machine if it has one."""

    def __init__(self, about: NightDescription) -> None:
        self._about = about
        self._newest: StateMessage | None = None
        self._task: asyncio.Task[None] | None = None

    def newest(self) -> StateMessage | None:
        """The newest state; None if there is none that was not given before."""
        newest, self._newest = self._newest, None
        return newest

    async def _listen(self, address: BrokerAddress) -> None:
        async for message in Subscriber(address, rig=self._about.rig, night=self._about.night):
            if isinstance(message, StateMessage):
                self._newest = message

    def __enter__(self) -> Self:
        host, _, port = (self._about.broker or "").rpartition(":")
        with contextlib.suppress(ValueError):  # no broker, or one that wants a password
            address = BrokerAddress(host, int(port))
            if address.loopback:
                self._task = asyncio.create_task(self._listen(address))
        return self

    def __exit__(self, *error: object) -> None:
        if self._task is not None:
            self._task.cancel()


async def from_folder(path: str | Path, *, poll_s: float = _POLL_S) -> AsyncGenerator[Message]:
    """A night's messages from its ledger, as it grows; ends when the night has.

    Margins are not in the ledger. If the night has a broker on this machine, its states are taken
    from there meanwhile; without it all the rest is the same.

    Parameters
    ----------
    path : str or Path
        The night's folder or its ledger.
    poll_s : float
        Pause in s between two looks at the file.

    Raises
    ------
    LedgerError
        There is no ledger, or it cannot be read.
    """
    with NightReader(path) as reader, _States(reader.description()) as states:
        about, channels = reader.description(), reader.channels()
        night, rig = about.night, about.rig
        number = event_id = finding_id = 0
        ended = False
        while True:
            found = False
            for event in reader.events(event_id):
                event_id, found = event.id, True
                if event.kind == "night":  # a night that was taken up again has not ended
                    ended = event.name == "ended"
                yield EventMessage.of(event, night=night, rig=rig)
            for finding in reader.findings(finding_id):
                finding_id, found = finding.id, True
                yield FindingMessage(
                    night=night,
                    rig=rig,
                    seq=finding.id,
                    source=finding.source or "analyst",
                    data=dict(finding.data),
                )
            while readings := reader.readings(number, _CHUNK):
                number, found = readings[-1].number, True
                yield ReadingBatch.of(readings, channels, night=night, rig=rig)
                await asyncio.sleep(0)
            if state := states.newest():
                yield state
            if not found:
                if ended:
                    return
                await asyncio.sleep(poll_s)


async def watch(
    source: AsyncIterator[Message],
    console: Console,
    *,
    refresh_s: float = 1.0,
    until_end: bool = True,
    once: bool = False,
    now: Callable[[], float] = time.time,
) -> Picture:
    """Show a night on a terminal until its end, or until cancelled.

    Parameters
    ----------
    source : async iterator of Message
        `from_broker` or `from_folder`.
    console : rich.console.Console
        One that is no terminal gets a single plain frame, at the end.
    refresh_s : float
        Pause between two frames, in s.
    until_end : bool
        Return when the night has ended; otherwise when the source does.
    once : bool
        Take what the source has now, show one frame and return.
    now : Callable[[], float]
        Wall time, seconds since 1970.

    Returns
    -------
    Picture
        What was known in the last frame.
    """
    picture = Picture()
    heard_s = time.monotonic()

    async def listen() -> None:
        nonlocal heard_s
        async for message in source:
            picture.take(message)
            heard_s = time.monotonic()

    begun_s = heard_s
    listening = asyncio.create_task(listen())

    def is_over() -> bool:
        quiet_s = time.monotonic() - heard_s
        if once:
            looked_s = time.monotonic() - begun_s
            return (quiet_s > _QUIET_S and bool(picture.night)) or looked_s > _LONGEST_LOOK_S
        return until_end and bool(picture.outcome) and quiet_s > _QUIET_S

    live = console.is_terminal and not once
    try:
        with _screen(console) if live else contextlib.nullcontext() as shown:
            while not listening.done() and not is_over():
                if shown is not None:
                    shown.update(_frame(picture, console, now()), refresh=True)
                await asyncio.wait({listening}, timeout=refresh_s if shown else _QUIET_S / 2)
    finally:
        listening.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await listening
    height = console.size.height - 1 if console.is_terminal else _PRINTED_HEIGHT
    console.print(_frame(picture, console, now(), height), soft_wrap=True)
    return picture


async def watch_until_end(
    source: AsyncIterator[Message], console: Console, *, once: bool = False
) -> Picture:
    """`watch` as the command line uses it: until the night has ended, or one frame."""
    return await watch(source, console, until_end=True, once=once)


def _screen(console: Console) -> Live:
    return Live(console=console, screen=True, auto_refresh=False)


def _frame(
    picture: Picture, console: Console, now_unix_s: float, height: int | None = None
) -> RenderableType:
    return render(
        picture,
        now_unix_s=now_unix_s,
        width=console.width,
        height=console.size.height if height is None else height,
        encoding=console.encoding,
    )
