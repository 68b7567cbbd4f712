"""``nightfield new``: a folder with a rig, a sequence and a world to start from."""

from pathlib import Path
from typing import Annotated

import typer

from orchestrator.cli.failing import Failed

_FILES = {
    "rig.toml": "rigs/demonstration.toml",
    "evening.toml": "short-evening.toml",
    "overnight.toml": "overnight-ladder.toml",
    "world.toml": "worlds/demonstration.toml",
}


def new(
    folder: Annotated[Path, typer.Argument(help="Folder to make the files in.")],
) -> None:
    """Write a rig, two sequences and a world to start from; nothing is written over.

    Example: nightfield new my-rig
    """
    from orchestrator.cli.composition import shipped

    there = [name for name in _FILES if (folder / name).exists()]
    if there:
        raise Failed(f"{folder} has {', '.join(there)} already; nothing was written")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        for name, source in _FILES.items():
            text = shipped(source).read_text(encoding="utf-8")
            (folder / name).write_text(text, encoding="utf-8")
    except OSError as error:
        raise Failed(f"{folder} cannot be written: {error.strerror}") from error
    typer.echo(f"wrote {', '.join(_FILES)} into {folder}")
    typer.echo(
        "The numbers are invented. Before a live run, put in your own rig's limits from its "
        "manuals, and the facility's rules, contact and permission."
    )
    typer.echo(f"Next: nightfield rehearse {folder / 'evening.toml'} --rig {folder / 'rig.toml'}")
