"""Readings from a table of comma-separated values, and what they show.

Columns: ``field_t``, ``temperature_k``, ``r_ohm``; also read where present: ``hall_ohm``,
``time_s`` and ``sweep``, a label. Other columns are refused by name, so that a misspelt one is not
lost.
"""

import csv
import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from orchestrator.analysis.findings import OrbitFinding
from orchestrator.analysis.hall import HallFinding, analyse_hall
from orchestrator.analysis.ladder import analyse_ladder
from orchestrator.analysis.sweeps import LEAST_POINTS, AnalysisError, Sweep
from orchestrator.physics.orbits import density_2d_m2

FloatArray = npt.NDArray[np.float64]

NEEDED = ("field_t", "temperature_k", "r_ohm")
OPTIONAL = ("hall_ohm", "time_s")
LABEL = "sweep"

_TURN_PART = 0.02  # the field has turned when it came back by this part of the table's range
_STEP_PART = 0.1  # relative change of temperature that begins another sweep
# Beyond these a column is in another unit: gauss, or millikelvin.
_STRONGEST_T = 2000.0
_WARMEST_K = 400.0


class TableError(AnalysisError):
    """A table cannot be read. The message names file, line, column, value and what is allowed."""


@dataclass(frozen=True)
class TableOrbit:
    """An orbit's finding, with its two-dimensional density per m^2 where a degeneracy was given."""

    finding: OrbitFinding
    density_m2: float | None
    density_sd_m2: float | None


@dataclass(frozen=True)
class TableAnalysis:
    """What a table shows: the sweeps read, the orbits from low to high frequency, and Hall.

    `hall` is None without a Hall column or slope; `hall_problem` then says why, if there is a
    column.
    """

    sweeps: tuple[Sweep, ...]
    orbits: tuple[TableOrbit, ...]
    hall: HallFinding | None
    hall_problem: str | None


def read_table(
    path: str | Path, *, time_constant_s: float = 0.0, poles: int = 1, interval_s: float = 1.0
) -> list[Sweep]:
    """Read a table into sweeps.

    Parameters
    ----------
    path : path
        The file, UTF-8, first line the column names.
    time_constant_s, poles : float, int
        The lock-in filter behind the readings; 0 for none known. The lag needs ``time_s``, or
        rows `interval_s` apart.
    interval_s : float
        Seconds between rows where the table has no ``time_s``.

    Returns
    -------
    list of Sweep
        By label where there is a ``sweep`` column; otherwise cut where the temperature steps by
        more than a tenth or the field turns. In either case in the order of the table.

    Raises
    ------
    TableError
        If the file, a column or a value is not as needed.
    """
    path = Path(path)
    columns, labels, lines = _read_columns(path)
    pieces = _by_label(labels) if labels is not None else _by_turn(columns)
    sweeps = []
    for name, rows in pieces:
        field = columns["field_t"][rows]
        if rows.size < LEAST_POINTS or np.ptp(field) == 0:
            if labels is None:
                continue  # the few rows between two sweeps
            raise TableError(
                f'{path}, line {lines[rows[0]]}: sweep "{name}" has {rows.size} rows over '
                f"{float(np.ptp(field)):g} T, allowed: {LEAST_POINTS} rows or more "
                "of a moving field"
            )
        time = columns["time_s"][rows] if "time_s" in columns else rows * interval_s
        backward = np.flatnonzero(np.diff(time) <= 0)
        if backward.size:
            row = rows[backward[0] + 1]
            raise TableError(
                f"{path}, line {lines[row]}, column time_s: {time[backward[0] + 1]:g}, "
                f"allowed: above the row before, {time[backward[0]]:g}"
            )
        sweeps.append(
            Sweep(
                name=name,
                direction=1 if abs(field[-1]) > abs(field[0]) else -1,
                time_s=np.asarray(time, dtype=np.float64),
                field_t=field,
                temperature_k=columns["temperature_k"][rows],
                resistance_ohm=columns["r_ohm"][rows],
                hall_ohm=columns["hall_ohm"][rows] if "hall_ohm" in columns else None,
                time_constant_s=time_constant_s,
                poles=poles,
            )
        )
    if not sweeps:
        raise TableError(
            f"{path}: {len(lines)} rows hold no sweep, allowed: {LEAST_POINTS} rows or more "
            "of a moving field"
        )
    return sweeps


def analyse_table(path: str | Path, degeneracy: int | None = None) -> TableAnalysis:
    """Read a table, find and fit its orbits, and fit its Hall resistance.

    Parameters
    ----------
    path : path
        The table; see `read_table`.
    degeneracy : int, optional
        Spin times valley degeneracy of a two-dimensional gas; gives each orbit a density.

    Raises
    ------
    TableError
        If the table cannot be read.
    AnalysisError
        If its sweeps cannot be analysed.
    """
    if degeneracy is not None and degeneracy < 1:
        raise AnalysisError(f"degeneracy: {degeneracy!r}, allowed: 1 or more")
    sweeps = read_table(path)
    orbits = []
    for finding in analyse_ladder(sweeps):
        density = density_sd = None
        if degeneracy is not None:
            density = density_2d_m2(finding.frequency_t, degeneracy)
            density_sd = density_2d_m2(finding.frequency_sd_t, degeneracy)
        orbits.append(TableOrbit(finding, density, density_sd))
    hall, problem = None, None
    if any(sweep.hall_ohm is not None for sweep in sweeps):
        try:
            hall = analyse_hall(sweeps)
        except AnalysisError as error:
            problem = str(error)
    return TableAnalysis(tuple(sweeps), tuple(orbits), hall, problem)


def _read_columns(
    path: Path,
) -> tuple[dict[str, FloatArray], list[str] | None, list[int]]:
    """Columns by name, labels if there are any, and the line of each row."""
    try:
        with path.open(newline="", encoding="utf-8-sig") as file:
            reader = csv.reader(file)
            names = _header(path, next(reader, []))
            rows = list(_rows(path, reader, names))
    except OSError as error:
        raise TableError(f"{path}: {error.strerror or error}") from error
    except UnicodeDecodeError as error:
        raise TableError(f"{path}: not text in UTF-8 ({error.reason})") from error
    except csv.Error as error:
        raise TableError(f"{path}: not a table of comma-separated values: {error}") from error
    numbers = [name for name in names if name != LABEL]
    columns = {
        name: np.asarray([values[names.index(name)] for _, values in rows], dtype=np.float64)
        for name in numbers
    }
    label_at = names.index(LABEL) if LABEL in names else None
    labels = None if label_at is None else [str(values[label_at]) for _, values in rows]
    return columns, labels, [line for line, _ in rows]


def _header(path: Path, cells: Sequence[str]) -> list[str]:
    names = [cell.strip() for cell in cells]
    allowed = ", ".join((*NEEDED, *OPTIONAL, LABEL))
    for name in names:
        if name not in (*NEEDED, *OPTIONAL, LABEL) or names.count(name) > 1:
            raise TableError(
                f'{path}, line 1, column "{name}": not known or given twice, allowed: {allowed}'
            )
    for name in NEEDED:
        if name not in names:
            raise TableError(f"{path}, line 1: no column {name}, allowed: {allowed}")
    return names


def _rows(
    path: Path, reader: Iterator[list[str]], names: Sequence[str]
) -> Iterator[tuple[int, list[float | str]]]:
    for line, cells in enumerate(reader, start=2):
        if not any(cell.strip() for cell in cells):
            continue
        if len(cells) != len(names):
            raise TableError(
                f"{path}, line {line}: {len(cells)} values, allowed: {len(names)}, one a column"
            )
        values: list[float | str] = []
        for name, cell in zip(names, cells, strict=True):
            values.append(cell.strip() if name == LABEL else _number(path, line, name, cell))
        yield line, values


def _number(path: Path, line: int, name: str, cell: str) -> float:
    try:
        value = float(cell)
    except ValueError:
        value = math.nan
    allowed = ""
    if not math.isfinite(value):
        allowed = "a number above 0" if name == "temperature_k" else "a finite number"
    elif name == "temperature_k" and not 0 < value <= _WARMEST_K:
        allowed = f"above 0 to {_WARMEST_K:g}, in kelvin"
    elif name == "field_t" and abs(value) > _STRONGEST_T:
        allowed = f"-{_STRONGEST_T:g} to {_STRONGEST_T:g}, in tesla"
    if allowed:
        raise TableError(
            f'{path}, line {line}, column {name}: "{cell.strip()}", allowed: {allowed}'
        )
    return value


def _by_label(labels: Sequence[str]) -> list[tuple[str, npt.NDArray[np.int64]]]:
    order = list(dict.fromkeys(labels))
    array = np.asarray(labels)
    return [(label, np.flatnonzero(array == label)) for label in order]


def _by_turn(columns: dict[str, FloatArray]) -> list[tuple[str, npt.NDArray[np.int64]]]:
    """Cut where the field turns by more than noise, or the temperature steps and stays."""
    field, temperature = np.abs(columns["field_t"]), columns["temperature_k"]
    if field.size == 0:
        return []
    back = _TURN_PART * float(np.ptp(field))
    cuts, start, extreme, sign = [0], 0, 0, 0
    for row in range(1, field.size):
        recent = float(np.median(temperature[max(start, row - 20) : row]))
        later = float(np.median(temperature[row : row + 20]))
        away = field[row] - field[extreme]
        stepped = (
            abs(later - recent) > _STEP_PART * recent
            and abs(temperature[row] - recent) > _STEP_PART / 2 * recent
        )
        jumped = abs(field[row] - field[row - 1]) > 10 * back
        if stepped or jumped:
            cuts.append(row)
            start, extreme, sign = row, row, 0
        elif sign == 0:
            if abs(away) > back:
                sign, extreme = (1 if away > 0 else -1), row
        elif sign * away >= 0:
            extreme = row
        elif abs(away) > back:
            cuts.append(extreme)
            start, extreme, sign = extreme, row, -sign
    cuts.append(field.size)
    pieces = [np.arange(a, b) for a, b in itertools.pairwise(cuts)]
    return [
        (f"{number} ({float(np.median(temperature[rows])):.3g} K)", rows)
        for number, rows in enumerate(pieces, start=1)
        if rows.size
    ]
