"""``nightfield analyse``: frequencies, masses and Dingle temperatures from a table or a night."""

import json
from pathlib import Path
from typing import Annotated, Any

import typer

from orchestrator.cli.failing import input_errors
from orchestrator.cli.options import AsJson


def analyse(
    source: Annotated[
        Path,
        typer.Argument(
            help="A table (CSV with field_t, temperature_k, r_ohm, and hall_ohm, sweep if there "
            "are any), or a night's folder."
        ),
    ],
    degeneracy: Annotated[
        int | None,
        typer.Option(min=1, max=100, help="Spin times valley; gives the density of a 2D gas."),
    ] = None,
    as_json: AsJson = False,
) -> None:
    """Find the oscillations in a table of readings, or in the ledger of a night.

    Example: nightfield analyse sweeps.csv --degeneracy 2
    """
    with input_errors():
        night = source.is_dir() or source.suffix == ".sqlite"
        found = _of_night(source, degeneracy) if night else _of_table(source, degeneracy)
    if as_json:
        print(json.dumps(found, indent=2))
        return
    _show(found)


def _of_table(source: Path, degeneracy: int | None) -> dict[str, Any]:
    from orchestrator.analysis.table import analyse_table

    analysis = analyse_table(source, degeneracy)
    orbits = []
    for orbit in analysis.orbits:
        row = _row({key: getattr(orbit.finding, key) for key in _KEYS})
        if degeneracy is not None:
            row["density_m2"] = orbit.density_m2
        orbits.append(row)
    found: dict[str, Any] = {"orbits": orbits}
    if analysis.hall is not None:
        found["hall"] = {
            "density_m2": analysis.hall.density_m2,
            "mobility_m2_per_vs": analysis.hall.mobility_m2_per_vs,
        }
    elif analysis.hall_problem:
        found["hall_problem"] = analysis.hall_problem
    return found


def _of_night(source: Path, degeneracy: int | None) -> dict[str, Any]:
    from orchestrator.analysis.analyst import find_in_ledger
    from orchestrator.physics.orbits import density_2d_m2

    data = find_in_ledger(source)
    orbits = []
    for orbit in data["orbits"]:
        row = _row(orbit)
        if degeneracy is not None:
            row["density_m2"] = float(density_2d_m2(row["frequency_t"], degeneracy))
        orbits.append(row)
    found: dict[str, Any] = {"orbits": orbits}
    if data.get("hall"):
        found["hall"] = {key: data["hall"].get(key) for key in ("density_m2", "mobility_m2_per_vs")}
    return found


_KEYS = ("frequency_t", "frequency_sd_t", "mass", "mass_sd", "dingle_k", "dingle_sd_k")


def _row(orbit: dict[str, Any]) -> dict[str, Any]:
    return {key: orbit[key] for key in _KEYS}


def _show(found: dict[str, Any]) -> None:
    from rich.box import SIMPLE
    from rich.console import Console
    from rich.table import Table

    from orchestrator.report.summary import with_uncertainty

    table = Table(box=SIMPLE)
    for heading in ("frequency / T", "mass / m_e", "Dingle temperature / K"):
        table.add_column(heading, justify="right")
    with_density = any("density_m2" in orbit for orbit in found["orbits"])
    if with_density:
        table.add_column("2D density / m⁻²", justify="right")
    for orbit in found["orbits"]:
        row = [
            with_uncertainty(orbit["frequency_t"], orbit["frequency_sd_t"]),
            with_uncertainty(orbit["mass"], orbit["mass_sd"]),
            with_uncertainty(orbit["dingle_k"], orbit["dingle_sd_k"]),
        ]
        table.add_row(*row, *([f"{orbit['density_m2']:.5g}"] if with_density else []))
    console = Console()
    if found["orbits"]:
        console.print(table)
    else:
        console.print("No oscillation was found above the noise.")
    if hall := found.get("hall"):
        mobility = hall["mobility_m2_per_vs"]
        known = "not known without a zero field" if mobility is None else f"{mobility:.4g} m²/(V s)"
        console.print(f"Hall: density {hall['density_m2']:.5g} m⁻², mobility {known}")
    elif problem := found.get("hall_problem"):
        console.print(f"Hall: {problem}")
