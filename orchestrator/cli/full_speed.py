"""A rehearsal at full speed: everything in one process, on a clock that jumps."""

import asyncio
from collections.abc import Callable, Mapping
from pathlib import Path

from orchestrator.bench import channels_of, open_bench
from orchestrator.cli.composition import (
    Files,
    Simulated,
    addresses_of,
    truth_of,
    world_parameters,
)
from orchestrator.cli.failing import INTERRUPTED, Failed
from orchestrator.cli.folders import new_folder
from orchestrator.cli.nights import Setting, describe, described_as_rehearsal, do_night
from orchestrator.cli.outlets import InsideOutlet
from orchestrator.cli.progress import NightProgress
from orchestrator.engine.clock import JumpingLoop
from orchestrator.engine.night import NightDone
from orchestrator.planning.forecast import forecast
from simulators.front_panel import FrontPanel
from simulators.panels import panels
from simulators.visa import attach
from simulators.world import World

Meddle = Callable[[World, dict[str, FrontPanel]], Mapping[str, FrontPanel]]


def _leave_alone(world: World, given: dict[str, FrontPanel]) -> Mapping[str, FrontPanel]:
    return given


def at_full_speed(
    files: Files,
    simulated: Simulated,
    *,
    seed: int,
    into: Path,
    evening_unix_s: float,
    quiet: bool,
    meddle: Meddle = _leave_alone,
) -> tuple[Path, NightDone]:
    """Rehearse; returns the night's folder and what became of it.

    ``meddle`` is given the world and the panels before the night, and returns the panels that are
    attached: a place to put faults in.
    """
    folder = new_folder(into, files.sequence.about.name)
    description = described_as_rehearsal(
        describe(files, night=folder.name, live=False, started_unix_s=evening_unix_s),
        seed=seed,
        world_text=simulated.document.text,
        truth=truth_of(simulated.world),
    )
    expected_s = forecast(files.rig, files.sequence).duration_s

    async def night(progress: NightProgress) -> NightDone:
        clock = asyncio.get_running_loop().time
        world = World(world_parameters(files.rig, simulated.world, seed), clock)
        addresses = addresses_of(files.rig)
        attached = meddle(world, panels(world))
        manager = attach({addresses[name]: panel for name, panel in attached.items()})
        bench = await open_bench(files.rig, files.rig_document, manager, inline=True)
        setting = Setting(
            folder=folder,
            description=description,
            commit="batched",
            clock=clock,
            wall=lambda: evening_unix_s + clock(),
            on_reading=progress.tell,
            on_trip=progress.say,
        )
        try:
            return await do_night(
                files,
                bench,
                setting,
                lambda ledger: InsideOutlet(
                    files.rig.about.name, folder.name, channels_of(files.rig), ledger
                ),
            )
        finally:
            await bench.close()

    with (
        NightProgress(expected_s, quiet=quiet, every=200) as progress,
        asyncio.Runner(loop_factory=JumpingLoop) as runner,
    ):
        try:
            return folder, runner.run(night(progress))
        except KeyboardInterrupt:
            text = f"stopped; what was rehearsed until then is in {folder}"
            raise Failed(text, INTERRUPTED) from None
