"""``nightfield hold``, ``park`` and ``acknowledge``: what a person asks of a running night.

A request is a row in the night's ledger, on the machine that runs the night; the engine takes it up
with its next reading. There is no way to ask over the network.
"""

import getpass
import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer

from orchestrator.cli.failing import Failed, input_errors
from orchestrator.cli.telling import tell
from orchestrator.units import duration_text

if TYPE_CHECKING:
    from orchestrator.ledger.reading import NightReader

_QUIET_S = 60.0  # readings come every few seconds; an interval may be longer, hence a warning only

Night = Annotated[Path, typer.Argument(help="The night's folder.")]
Reason = Annotated[str, typer.Option(help="Why; it is recorded.")]
Person = Annotated[str, typer.Option(help="Who asks; your login name if left out.")]


def _ask(
    night: Path, kind: Literal["hold", "park", "acknowledge"], name: str, reason: str, person: str
) -> None:
    with input_errors():
        from orchestrator.ledger.reading import NightReader
        from orchestrator.ledger.requests import write_request

        if not reason.strip():
            raise Failed('--reason "" is not allowed: say why; it is recorded')
        with NightReader(night) as reader:
            _refuse_what_nobody_takes_up(reader, kind, name)
            quiet = _quiet_for(reader)
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
    if quiet:
        tell(f"nightfield: {quiet}")


def _refuse_what_nobody_takes_up(reader: "NightReader", kind: str, name: str) -> None:
    """Refuse a request to a night that has ended, and one that clears no trip that stands."""
    ended, standing = False, dict[str, None]()
    for event in reader.events():
        if event.kind == "night":
            ended = event.name == "ended"
        elif event.kind == "trip":
            standing[event.name] = None
        elif event.kind == "acknowledge":
            standing.pop(event.name, None)
    if ended:
        raise Failed(f"{reader.path.parent}: this night has ended; nobody takes a request up")
    if kind == "acknowledge" and name not in standing:
        stand = ", ".join(standing) or "none"
        raise Failed(f'{reader.path.parent}: no trip "{name}" stands there (standing: {stand})')


def _quiet_for(reader: "NightReader") -> str:
    """What to say of a night that has written no reading for long; empty if it has."""
    newest = reader.readings(reader.last_number() - 1, 1)
    written_s = newest[0].unix_s if newest else reader.description().started_unix_s
    age_s = time.time() - written_s
    if age_s < _QUIET_S:
        return ""
    return (
        f"this night has read nothing for {duration_text(age_s)}; if its process has died, nobody "
        "takes the request up: look after the magnet at its supply"
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
