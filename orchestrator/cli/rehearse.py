"""``nightfield rehearse``: run a sequence against the simulated rig."""

import time
from pathlib import Path
from typing import Annotated

import typer

from orchestrator.cli.failing import Failed, input_errors
from orchestrator.cli.options import AsJson, NightsFolder, RigPath, Seed, SequencePath, WorldPath

# The evening on which rehearsals at full speed play, so that two of them are equal to the byte:
# 2000-01-01 20:00 UTC.
REHEARSAL_EVENING_UNIX_S = 946_756_800.0


def rehearse(
    sequence: SequencePath = None,
    rig: RigPath = None,
    world: WorldPath = None,
    seed: Seed = None,
    pace: Annotated[
        str, typer.Option(help='"max", or how many times faster than the wall it runs.')
    ] = "max",
    into: NightsFolder = Path("nights"),
    as_json: AsJson = False,
) -> None:
    """Run a sequence against the simulated rig, and compare what is found with the truth.

    At pace "max" a night takes seconds and the same seed gives the same night. At a number, real
    processes, sockets and the broker take part.

    Example: nightfield rehearse overnight.toml --rig rig.toml --seed 7
    """
    with input_errors():
        speed = _pace(pace)
        from orchestrator.cli.composition import load_files, load_simulated

        files = load_files(rig, sequence)
        simulated = load_simulated(world, files.rig)
        began_s = time.monotonic()
        if speed is None:
            from orchestrator.cli.full_speed import at_full_speed

            folder, done = at_full_speed(
                files,
                simulated,
                seed=simulated.world.about.seed if seed is None else seed,
                into=into,
                evening_unix_s=REHEARSAL_EVENING_UNIX_S,
                quiet=as_json,
            )
        else:
            from orchestrator.cli.live import rehearse_at_pace

            folder, done = rehearse_at_pace(
                files,
                simulated,
                seed=simulated.world.about.seed if seed is None else seed,
                into=into,
                pace=speed,
                quiet=as_json,
            )
        from orchestrator.cli.closing import close_night

        close_night(folder, done, wall_s=time.monotonic() - began_s, as_json=as_json)


def _pace(text: str) -> float | None:
    if text == "max":
        return None
    try:
        pace = float(text)
    except ValueError:
        pace = float("nan")
    if not 0 < pace <= 10_000:
        raise Failed(f'--pace {text} is not allowed: "max", or a number above 0 to 10000')
    return pace
