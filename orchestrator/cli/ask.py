"""``nightfield hold``, ``park`` and ``acknowledge``: what a person asks of a running night.

A request is a row in the night's ledger, on the machine that runs the night; the engine takes it up
with its next reading. There is no way to ask over the network.
"""

import getpass
import time
from pathlib import Path
from typing import Annotated, Literal

import typer

from orchestrator.cli.failing import input_errors

Night = Annotated[Path, typer.Argument(help="The night's folder.")]
Reason = Annotated[str, typer.Option(help="Why; it is recorded.")]
Person = Annotated[str, typer.Option(help="Who asks; your login name if left out.")]


def _ask(
    night: Path, kind: Literal["hold", "park", "acknowledge"], name: str, reason: str, person: str
) -> None:
    with input_errors():
        from orchestrator.ledger.requests import write_request

        number = write_request(
            night,
            kind,
            name=name,
            reason=reason,
            person=person or getpass.getuser(),
            unix_s=time.time(),
        )
    typer.echo(
        f"request {number} ({kind}) is recorded; the night takes it up with its next reading"
    )


def hold(night: Night, reason: Reason, person: Person = "") -> None:
    """Make a running night hold the magnet where it is, until "acknowledge hold".

    Example: nightfield hold nights/2026-12-01-2210-overnight --reason "filling nitrogen"
    """
    _ask(night, "hold", "", reason, person)


def park(night: Night, reason: Reason, person: Person = "") -> None:
    """End a running night: ramp to zero within the ceilings, heaters off.

    Example: nightfield park nights/2026-12-01-2210-overnight --reason "pump down"
    """
    _ask(night, "park", "", reason, person)


def acknowledge(
    night: Night,
    trip: Annotated[str, typer.Argument(help="Name of the trip.")],
    reason: Reason,
    person: Person = "",
) -> None:
    """Clear a trip of a running night, by its name and with a reason.

    Example: nightfield acknowledge nights/2026-12-01-2210-overnight hold --reason "filled"
    """
    _ask(night, "acknowledge", trip, reason, person)
