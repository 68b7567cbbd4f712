"""``nightfield hold``, ``park`` and ``acknowledge``: what a person asks of a running night.

A request is a row in the night's ledger, on the machine that runs the night; the engine takes it up
with its next reading. There is no way to ask over the network.
"""

import getpass
import time
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

import typer

from orchestrator.cli.failing import NOT_TAKEN_UP, Failed, input_errors
from orchestrator.units import duration_text

if TYPE_CHECKING:
    from orchestrator.ledger.reading import NightReader

_PATIENCE_S = 10.0
_LOOK_EVERY_S = 0.2

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
            patience_s = max(_PATIENCE_S, 3 * _interval_s(reader))
        number = write_request(
            night,
            kind,
            name=name,
            reason=reason,
            person=person or getpass.getuser(),
            unix_s=time.time(),
        )
        typer.echo(f"request {number} ({kind}) is recorded")
        if not _taken_up(night, number, patience_s):
            raise Failed(
                f"{night}: nobody has taken request {number} up within "
                f"{duration_text(patience_s)}. If the night's process has died, nobody will: look "
                "after the magnet at its supply",
                NOT_TAKEN_UP,
            )
    typer.echo("the night has taken it up")


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


def _interval_s(reader: "NightReader") -> float:
    """From one reading to the next, as the night told it at its start; 0 if it did not."""
    told = [one.data.get("interval_s") for one in reader.events() if one.kind == "night"]
    return max((float(one) for one in told if isinstance(one, int | float)), default=0.0)


def _taken_up(night: Path, number: int, patience_s: float) -> bool:
    """Wait until the night has taken a request up; False if it does not in time."""
    from orchestrator.ledger.reading import NightReader

    end_s = time.monotonic() + patience_s
    while True:
        with NightReader(night) as reader:
            if any(one.id == number and one.taken_s is not None for one in reader.requests()):
                return True
        if time.monotonic() > end_s:
            return False
        time.sleep(_LOOK_EVERY_S)


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
