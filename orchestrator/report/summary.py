"""What a night came to, from its ledger alone: the JSON object and the closing table."""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rich.box import SIMPLE
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from orchestrator.ledger.reading import NightReader
from orchestrator.report.checker import check_night
from orchestrator.report.numbers import ONE_SD, with_uncertainty
from orchestrator.units import duration_text

_TRUE = ("frequency_t", "mass", "dingle_k")
_FINDING_KEYS = ("frequency_t", "frequency_sd_t", "mass", "mass_sd", "dingle_k", "dingle_sd_k")


@dataclass(frozen=True, slots=True)
class Summary:
    """One night, as ``--json`` prints it."""

    night: str
    outcome: str
    simulated_s: float
    wall_s: float
    readings: int
    steps: list[dict[str, Any]]
    trips: list[dict[str, Any]]
    violations: list[str]
    findings: list[dict[str, Any]]
    truth: list[dict[str, float]] | None
    fingerprint: str

    def as_json(self) -> dict[str, Any]:
        """The object of ``--json``; ``truth`` is there in rehearsals only."""
        keys = [*self.__slots__]
        if self.truth is None:
            keys.remove("truth")
        return {key: getattr(self, key) for key in keys}


def summarise(
    folder: Path, *, outcome: str, simulated_s: float, wall_s: float, steps: list[dict[str, Any]]
) -> Summary:
    """Read a finished night back and check every command of it."""
    with NightReader(folder) as reader:
        description = reader.description()
        truth = description.truth
        findings = reader.findings()
        orbits = findings[-1].data.get("orbits", []) if findings else []
        return Summary(
            night=str(folder),
            outcome=outcome,
            simulated_s=simulated_s,
            wall_s=wall_s,
            readings=reader.last_number(),
            steps=steps,
            trips=[
                {"name": one.name, "response": one.severity, "time_s": one.time_s, "text": one.text}
                for one in reader.events()
                if one.kind == "trip"
            ],
            violations=check_night(reader),
            findings=[{key: one.get(key) for key in _FINDING_KEYS} for one in orbits],
            truth=None if truth is None else list(truth["orbits"]),
            fingerprint=reader.fingerprint(),
        )


def closing_table(summary: Summary) -> RenderableType:
    """The table at the end of a night: what was found, and in a rehearsal the truth beside it."""
    table = Table(title=_title(summary), title_justify="left", box=SIMPLE)
    for heading in ("orbit", "F / T", "mass / m_e", "T_D / K"):
        table.add_column(heading, justify="right", no_wrap=True)
    missed = list(summary.truth or [])
    for number, found in enumerate(summary.findings, 1):
        pairs = (
            ("frequency_t", "frequency_sd_t"),
            ("mass", "mass_sd"),
            ("dingle_k", "dingle_sd_k"),
        )
        values = [with_uncertainty(found[key], found[spread]) for key, spread in pairs]
        table.add_row(str(number), *values)
        if true := _nearest(found, summary.truth):
            table.add_row("truth", *(f"{true[key]:g}" for key in _TRUE), style="dim")
            missed = [one for one in missed if one is not true]
    if not summary.findings:
        table.add_row("none", "-", "-", "-")
    for true in missed:
        table.add_row("not found", *(f"{true[key]:g}" for key in _TRUE), style="dim")
    lines = [
        "F: frequency, T_D: Dingle temperature",
        ONE_SD,
        f"{summary.readings} readings in {duration_text(summary.simulated_s)} of the night, "
        f"{summary.wall_s:.1f} s of wall time",
        f"trips: {', '.join(one['name'] for one in summary.trips) or 'none'}",
        "commands checked apart from the engine: "
        + (
            f"{len(summary.violations)} unsafe"
            if summary.violations
            else "each was safe as the last"
        ),
        *summary.violations[:5],
        f"night: {summary.night}",
    ]
    return Group(table, Text("\n".join(lines)))


def _title(summary: Summary) -> str:
    return f"The night ended: {summary.outcome}"


def _nearest(
    found: dict[str, Any], truth: list[dict[str, float]] | None
) -> dict[str, float] | None:
    """The true orbit that a found one belongs to, if one is within a tenth of its frequency."""
    near = [
        one
        for one in truth or []
        if abs(one["frequency_t"] - found["frequency_t"]) < 0.1 * one["frequency_t"]
    ]
    distance = [abs(one["frequency_t"] - found["frequency_t"]) for one in near]
    return near[distance.index(min(distance))] if near else None
