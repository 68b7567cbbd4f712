"""Rehearsals in the test's own process, at full speed, with faults put in by hand."""

import asyncio
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from orchestrator.cli.composition import load_files, load_simulated
from orchestrator.cli.full_speed import at_full_speed
from orchestrator.engine.night import NightDone
from orchestrator.ledger.reading import NightReader
from orchestrator.report.checker import check_night
from simulators.faults import FaultyPanel
from simulators.front_panel import FrontPanel
from simulators.world import World

TINY = """
[sequence]
name = "tiny"
[prior]
spread = 0.1
orbits = [{ frequency = "460 T", mass = 0.17, dingle = "1.5 K" }]
[[step]]
kind = "ladder"
name = "ladder"
temperatures = ["0.6 K", "1 K"]
tolerance = "20 mK"
window = "20 s"
timeout = "10 min"
on_timeout = "continue"
[step.sweep]
kind = "field-sweep"
name = "sweep"
from = "5.5 T"
to = "6.5 T"
direction = "nearest"
samples_per_period = 5
"""

Faults = Callable[[World, dict[str, FaultyPanel], asyncio.AbstractEventLoop], None]


@dataclass
class Rehearsed:
    """A finished rehearsal."""

    done: NightDone
    folder: Path
    world: World

    @property
    def reader(self) -> NightReader:
        return NightReader(self.folder)

    @property
    def trips(self) -> list[str]:
        return [one.name for one in self.reader.events() if one.kind == "trip"]

    @property
    def violations(self) -> list[str]:
        return check_night(self.reader)


def rehearse(
    place: Path, *, seed: int = 1, sequence: str = TINY, faults: Faults | None = None
) -> Rehearsed:
    """Rehearse a sequence on the shipped rig; ``faults`` may set timers on the night's loop."""
    file = place / "sequence.toml"
    file.write_text(sequence, encoding="utf-8")
    files = load_files(None, file)
    worlds: list[World] = []

    def meddle(world: World, panels: dict[str, FrontPanel]) -> Mapping[str, FrontPanel]:
        worlds.append(world)
        faulty = {name: FaultyPanel(panel) for name, panel in panels.items()}
        if faults is not None:
            faults(world, faulty, asyncio.get_running_loop())
        return faulty

    folder, done = at_full_speed(
        files,
        load_simulated(None, files.rig),
        seed=seed,
        into=place / "nights",
        evening_unix_s=946_756_800.0,
        quiet=True,
        meddle=meddle,
    )
    return Rehearsed(done, folder, worlds[0])
