"""``nightfield run``: a live night on the rig's own instruments."""

import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from orchestrator.cli.failing import Failed, input_errors
from orchestrator.cli.options import AsJson, NightsFolder
from orchestrator.cli.telling import tell

if TYPE_CHECKING:
    from orchestrator.cli.composition import Files


def run(
    sequence: Annotated[Path, typer.Argument(help="Sequence file.")],
    rig: Annotated[Path, typer.Option("--rig", help="Rig file.")],
    into: NightsFolder = Path("nights"),
    pace: Annotated[
        float, typer.Option(help="Faster than real time; for simulated instruments only.")
    ] = 1.0,
    as_json: AsJson = False,
) -> None:
    """Run a night on the rig's instruments, after showing what to beware of.

    It refuses to start unless the rig file names the facility's rules, the person to call, and who
    has permitted unattended running. Ctrl-C parks the rig.

    Example: nightfield run overnight.toml --rig rig.toml
    """
    if not 0 < pace <= 10_000:
        raise Failed(f"--pace {pace:g} is not allowed: a number above 0 to 10000")
    with input_errors():
        from orchestrator.cli.composition import load_files
        from orchestrator.cli.live import live_night
        from orchestrator.planning.cautions import cautions

        files = load_files(rig, sequence)
        for caution in cautions(files.rig):
            tell(f"- {caution}")
        _ask_the_facility(files)
        began_s = time.monotonic()
        folder, done = live_night(
            files,
            into=into,
            pace=pace,
            quiet=as_json,
        )
        from orchestrator.cli.closing import close_night

        close_night(
            folder,
            done,
            wall_s=time.monotonic() - began_s,
            as_json=as_json,
            contact=files.rig.facility.contact,
        )


def _ask_the_facility(files: "Files") -> None:
    """Refuse a live run where the rig file does not say whose rules apply."""
    facility = files.rig.facility
    missing = [
        f"{files.rig_document.where('facility', key)}: no live run without {meaning}"
        for key, meaning in (
            ("rules", "the facility's rules that apply to this magnet"),
            ("contact", "the person to call, and how"),
            ("permission", "who has permitted unattended running, and for when"),
        )
        if not getattr(facility, key).strip()
    ]
    if missing:
        raise Failed("\n".join(missing))
    tell(f"rules: {facility.rules}\ncall: {facility.contact}\npermission: {facility.permission}")
