"""Tables of comma-separated values: read, cut into sweeps, analysed, refused by place and value."""

from pathlib import Path

import numpy as np
import pytest

from orchestrator.analysis.table import TableError, analyse_table, read_table
from orchestrator.physics.orbits import density_2d_m2
from tests.analysis.simulated import LIGHT, TrueOrbit, fields, resistance_ohm

FIELD = fields(4.0, 12.0, 450.0, 1.0)


def write_table(
    path: Path,
    temperatures_k: tuple[float, ...],
    *,
    labels: bool = False,
    orbits: tuple[TrueOrbit, ...] = (LIGHT,),
) -> Path:
    """Sweeps up and down in turn, one below the other."""
    random = np.random.default_rng(3)
    lines = ["field_t,temperature_k,r_ohm,hall_ohm" + (",sweep" if labels else "")]
    for number, temperature in enumerate(temperatures_k):
        field = FIELD if number % 2 == 0 else FIELD[::-1]
        values = resistance_ohm(field, temperature, orbits) + 0.05 * random.normal(size=field.size)
        for b, r in zip(field, values, strict=True):
            warm = temperature * (1 + 2e-4 * random.normal())
            hall = 124.8 * b + random.normal()
            label = f",night {number}" if labels else ""
            lines.append(f"{b:.6f},{warm:.5f},{r:.6f},{hall:.4f}{label}")
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


@pytest.mark.parametrize("labels", [False, True])
def test_table_is_cut_into_its_sweeps(tmp_path: Path, labels: bool) -> None:
    """By label, or where the field turns and where the temperature steps."""
    path = write_table(tmp_path / "t.csv", (0.4, 0.4, 3.0, 6.0), labels=labels)
    sweeps = read_table(path)
    assert [s.direction for s in sweeps] == [1, -1, 1, -1]
    assert [round(float(s.temperature_k.mean()), 1) for s in sweeps] == [0.4, 0.4, 3.0, 6.0]
    assert all(abs(s.field_t.size - FIELD.size) <= 1 for s in sweeps)
    assert (sweeps[0].name == "night 0") is labels


def test_table_gives_orbit_density_and_hall(tmp_path: Path) -> None:
    """The whole way from a file to mass and density."""
    found = analyse_table(write_table(tmp_path / "t.csv", (0.4, 3.0, 6.0)), degeneracy=2)
    (orbit,) = found.orbits
    assert orbit.finding.mass is not None
    assert orbit.finding.mass_sd is not None
    assert abs(orbit.finding.mass - LIGHT.mass) < 4.5 * orbit.finding.mass_sd
    assert orbit.density_m2 == pytest.approx(density_2d_m2(410.0, 2), rel=1e-3)
    assert found.hall is not None
    assert found.hall.slope_ohm_per_t == pytest.approx(124.8, rel=1e-3)
    assert analyse_table(tmp_path / "t.csv").orbits[0].density_m2 is None


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            "field_t,r_ohm\n1,2\n",
            "line 1: no column temperature_k, allowed: field_t, temperature_k",
        ),
        ("field_t,temperature_k,r_ohms\n", 'line 1, column "r_ohms": not known or given twice'),
        ("field_t,temperature_k,r_ohm\n1,2,3\n1,2\n", "line 3: 2 values, allowed: 3"),
        (
            "field_t,temperature_k,r_ohm\n1,2,3\n\n1,2,x9\n",
            'line 4, column r_ohm: "x9", allowed: a finite number',
        ),
        (
            "field_t,temperature_k,r_ohm\n1,-2,3\n",
            'column temperature_k: "-2", allowed: above 0 to 400, in kelvin',
        ),
        (
            "field_t,temperature_k,r_ohm\n1,500,3\n",
            'column temperature_k: "500", allowed: above 0 to 400, in kelvin',
        ),
        (
            "field_t,temperature_k,r_ohm\n30000,2,3\n",
            'column field_t: "30000", allowed: -2000 to 2000, in tesla',
        ),
        ("field_t,temperature_k,r_ohm\n1,2,inf\n", 'column r_ohm: "inf"'),
        ("field_t,temperature_k,r_ohm\n1,2,3\n", "1 rows hold no sweep, allowed: 40 rows or more"),
        ("field_t,temperature_k,r_ohm,sweep\n1,2,3,a\n", 'line 2: sweep "a" has 1 rows over 0 T'),
        ("", "line 1: no column field_t"),
    ],
)
def test_table_errors_name_file_line_column_value(tmp_path: Path, text: str, message: str) -> None:
    """What a person needs to mend the file."""
    path = tmp_path / "bad.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(TableError) as caught:
        read_table(path)
    assert message in str(caught.value)
    assert str(path) in str(caught.value)


def test_missing_and_binary_files_are_table_errors(tmp_path: Path) -> None:
    """Not a traceback of the operating system's."""
    with pytest.raises(TableError, match="No such file"):
        read_table(tmp_path / "none.csv")
    (tmp_path / "x.csv").write_bytes(b"\xff\xfe\x00\x81")
    with pytest.raises(TableError, match="not text in UTF-8"):
        read_table(tmp_path / "x.csv")
