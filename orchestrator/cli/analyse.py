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
    found: dict[str, Any] = {
        "orbits": [
            _row({key: getattr(orbit.finding, key) for key in _KEYS}, degeneracy)
            for orbit in analysis.orbits
        ]
    }
    if analysis.hall is not None:
        found["hall"] = {key: getattr(analysis.hall, key) for key in _HALL_KEYS}
    elif analysis.hall_problem:
        found["hall_problem"] = analysis.hall_problem
    return found


def _of_night(source: Path, degeneracy: int | None) -> dict[str, Any]:
    from orchestrator.analysis.analyst import find_in_ledger

    data = find_in_ledger(source)
    found: dict[str, Any] = {"orbits": [_row(orbit, degeneracy) for orbit in data["orbits"]]}
    if data.get("hall"):
        found["hall"] = {key: data["hall"].get(key) for key in _HALL_KEYS}
    if data.get("problem"):
        found["problem"] = data["problem"]
    return found


_KEYS = ("frequency_t", "frequency_sd_t", "mass", "mass_sd", "dingle_k", "dingle_sd_k")


_HALL_KEYS = ("density_m2", "density_sd_m2", "mobility_m2_per_vs", "mobility_sd_m2_per_vs")


def _row(orbit: dict[str, Any], degeneracy: int | None) -> dict[str, Any]:
    from orchestrator.physics.orbits import density_2d_m2

    row = {key: orbit[key] for key in _KEYS}
    if degeneracy is not None:
        row["density_m2"] = float(density_2d_m2(row["frequency_t"], degeneracy))
        row["density_sd_m2"] = float(density_2d_m2(row["frequency_sd_t"], degeneracy))
    return row


def _show(found: dict[str, Any]) -> None:
    from rich.box import SIMPLE
    from rich.console import Console
    from rich.table import Table

    from orchestrator.report.numbers import ONE_SD, with_power, with_uncertainty

    console = Console()
    table = Table(box=SIMPLE)
    for heading in ("F / T", "mass / m_e", "T_D / K"):
        table.add_column(heading, justify="right", no_wrap=True)
    for orbit in found["orbits"]:
        table.add_row(
            with_uncertainty(orbit["frequency_t"], orbit["frequency_sd_t"]),
            with_uncertainty(orbit["mass"], orbit["mass_sd"]),
            with_uncertainty(orbit["dingle_k"], orbit["dingle_sd_k"]),
        )
    if not found["orbits"]:
        console.print("No oscillation was found above the noise.")
    else:
        console.print(table)
        console.print("F: frequency, T_D: Dingle temperature")
        if any(orbit["mass"] is None for orbit in found["orbits"]):
            console.print("- : mass and T_D want sweeps at two temperatures or more")
    for orbit in found["orbits"]:
        if "density_m2" in orbit:
            density = with_power(orbit["density_m2"], orbit["density_sd_m2"])
            console.print(f"orbit at {orbit['frequency_t']:.6g} T: 2D density {density} m⁻²")
    if hall := found.get("hall"):
        known = "not known without a zero field"
        if hall["mobility_m2_per_vs"] is not None:
            value = with_uncertainty(hall["mobility_m2_per_vs"], hall["mobility_sd_m2_per_vs"])
            known = f"{value} m²/(V s)"
        density = with_power(hall["density_m2"], hall["density_sd_m2"])
        console.print(f"Hall: density {density} m⁻², mobility {known}")
    if found["orbits"] or found.get("hall"):
        console.print(ONE_SD)
    for key in ("hall_problem", "problem"):
        if key in found:
            console.print(f"{'Hall: ' if key == 'hall_problem' else ''}{found[key]}", markup=False)
