"""Arguments and options that several commands share."""

from pathlib import Path
from typing import Annotated

import typer

SequencePath = Annotated[
    Path | None, typer.Argument(help="Sequence file; the shipped short evening if left out.")
]
RigPath = Annotated[
    Path | None, typer.Option("--rig", help="Rig file; the shipped demonstration rig if left out.")
]
WorldPath = Annotated[
    Path | None,
    typer.Option(
        "--world", help="World file: what the simulated rig really is; shipped if left out."
    ),
]
Seed = Annotated[
    int | None, typer.Option(min=0, help="Seed of the simulated noise, instead of the world's.")
]
NightsFolder = Annotated[
    Path, typer.Option("--into", help="Folder in which the night's own folder is made.")
]
AsJson = Annotated[bool, typer.Option("--json", help="Print one JSON object and nothing else.")]
