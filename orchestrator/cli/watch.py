"""``nightfield watch``: the dashboard of a running night, in any number of terminals."""

import asyncio
from collections.abc import AsyncIterator
from pathlib import Path
from typing import Annotated

import typer

from orchestrator.cli.failing import Failed, input_errors


def watch(
    night: Annotated[
        Path | None,
        typer.Argument(help="A night's folder; the newest one in nights/ if left out."),
    ] = None,
    broker: Annotated[
        str | None, typer.Option(help="Follow the stream of HOST:PORT instead of a folder.")
    ] = None,
    rig: Annotated[str | None, typer.Option(help="With --broker: the rig's name.")] = None,
    once: Annotated[bool, typer.Option("--once", help="Show one frame and end.")] = False,
) -> None:
    """Show how a night is doing; nothing can be commanded from here.

    Example: nightfield watch, or nightfield watch --broker 127.0.0.1:1883 --rig my-rig
    """
    with input_errors():
        from rich.console import Console

        from orchestrator.cli.folders import newest_night
        from orchestrator.screen.sources import from_broker, from_folder, watch_until_end
        from orchestrator.stream.address import BrokerAddress
        from orchestrator.stream.messages import Message

        source: AsyncIterator[Message]
        if broker is None:
            source = from_folder(night or newest_night(Path("nights")))
        else:
            if rig is None:
                raise Failed("--broker needs --rig, the name of the rig whose night to follow")
            host, _, port = broker.rpartition(":")
            if not port.isdecimal():
                raise Failed(f"--broker {broker}: expected HOST:PORT")
            source = from_broker(BrokerAddress(host or "127.0.0.1", int(port)), rig)
        with asyncio.Runner(loop_factory=asyncio.SelectorEventLoop) as runner:
            try:
                picture = runner.run(watch_until_end(source, Console(), once=once))
            except KeyboardInterrupt:
                return
    if broker is not None and not picture.night:
        raise Failed(f"--broker {broker} --rig {rig}: nothing was heard of a night there")
