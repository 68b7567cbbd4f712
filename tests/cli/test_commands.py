"""The command line from outside: what a person types, what comes back, and with which code."""

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

SHIPPED = Path(__file__).parents[2] / "sequences"


def nightfield(*words: str, place: Path, code: int = 0) -> subprocess.CompletedProcess[str]:
    done = subprocess.run(
        [sys.executable, "-m", "orchestrator.cli.main", *words],
        cwd=place,
        capture_output=True,
        text=True,
        timeout=180,
        check=False,
        env=_environment(),
    )
    assert done.returncode == code, done.stderr + done.stdout
    return done


def _environment() -> dict[str, str]:
    import os

    root = str(Path(__file__).parents[2])
    return {**os.environ, "PYTHONPATH": root, "COLUMNS": "100", "NO_COLOR": "1"}


@pytest.fixture(scope="module")
def evening(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    """One rehearsal of the short evening, as a person would ask for it."""
    place = tmp_path_factory.mktemp("evening")
    found: dict[str, Any] = json.loads(nightfield("rehearse", "--json", place=place).stdout)
    found["place"] = place
    return found


def test_rehearse_finds_the_worlds_truth_within_three_standard_deviations(
    evening: dict[str, Any],
) -> None:
    assert evening["outcome"] == "done"
    assert evening["trips"] == []
    assert evening["violations"] == []
    assert len(evening["findings"]) == len(evening["truth"]) == 2
    truth = sorted(evening["truth"], key=lambda one: one["frequency_t"])
    findings = sorted(evening["findings"], key=lambda one: one["frequency_t"])
    for found, true in zip(findings, truth, strict=True):
        off = abs(found["frequency_t"] - true["frequency_t"])
        assert off < 3 * found["frequency_sd_t"]
        assert off < 0.01 * true["frequency_t"]
        assert abs(found["mass"] - true["mass"]) < 3 * found["mass_sd"]
        assert abs(found["dingle_k"] - true["dingle_k"]) < 3 * found["dingle_sd_k"]


def test_rehearse_prints_the_object_that_is_promised(evening: dict[str, Any]) -> None:
    assert set(evening) - {"place"} == {
        "night",
        "outcome",
        "simulated_s",
        "wall_s",
        "readings",
        "steps",
        "trips",
        "violations",
        "findings",
        "truth",
        "fingerprint",
    }
    assert all(set(one) == {"name", "outcome", "duration_s"} for one in evening["steps"])
    assert len(evening["fingerprint"]) == 64
    assert (evening["place"] / evening["night"] / "night.sqlite").exists()


def test_the_forecast_comes_true(evening: dict[str, Any]) -> None:
    """The forecast knows the prior only; the found frequencies make the night a little shorter."""
    expected = json.loads(nightfield("forecast", "--json", place=evening["place"]).stdout)
    assert set(expected) == {"duration_s", "constant_rate_duration_s", "steps", "cautions"}
    assert evening["simulated_s"] == pytest.approx(expected["duration_s"], rel=0.15)
    assert evening["simulated_s"] <= expected["duration_s"] * 1.02
    assert expected["constant_rate_duration_s"] > expected["duration_s"]
    for step in expected["steps"]:
        assert set(step) == {
            "name",
            "start_s",
            "duration_s",
            "samples",
            "samples_per_period_min",
            "binding",
        }
        assert sum(step["binding"].values()) == pytest.approx(1.0 if step["binding"] else 0.0)
    sweeps = [one for one in expected["steps"] if one["samples_per_period_min"] is not None]
    assert all(one["samples_per_period_min"] >= 8 for one in sweeps)


def test_the_forecast_of_the_overnight_ladder_is_some_eleven_hours(tmp_path: Path) -> None:
    file = str(SHIPPED / "overnight-ladder.toml")
    expected = json.loads(nightfield("forecast", file, "--json", place=tmp_path).stdout)
    assert 10 < expected["duration_s"] / 3600 < 12.5
    assert expected["constant_rate_duration_s"] > 2 * expected["duration_s"]


def test_a_finished_night_can_be_analysed_again(evening: dict[str, Any]) -> None:
    words = ("analyse", evening["night"], "--json", "--degeneracy", "2")
    found = json.loads(nightfield(*words, place=evening["place"]).stdout)
    again = {round(one["frequency_t"], 6) for one in found["orbits"]}
    assert again == {round(one["frequency_t"], 6) for one in evening["findings"]}
    # n = g e F / h: SI 2019 values of e and h.
    first = found["orbits"][0]
    density = 2 * 1.602176634e-19 * first["frequency_t"] / 6.62607015e-34
    assert first["density_m2"] == pytest.approx(density)
    assert found["hall"]["density_m2"] == pytest.approx(5.2e16, rel=0.01)


def test_a_finished_night_is_analysed_for_people_too(evening: dict[str, Any]) -> None:
    shown = nightfield("analyse", evening["night"], place=evening["place"])
    assert shown.returncode == 0, shown.stderr
    assert "412.5" in shown.stdout
    assert "mobility not known without a zero field" in shown.stdout


def test_a_finished_night_can_be_looked_at(evening: dict[str, Any]) -> None:
    shown = nightfield("watch", evening["night"], "--once", place=evening["place"]).stdout
    assert "lantern-cellar" in shown
    assert "times since its start" in shown
    assert "2000" not in shown


def test_analyse_reads_a_table(tmp_path: Path) -> None:
    from math import cos, exp, pi, sinh

    rows = ["field_t,temperature_k,r_ohm,hall_ohm,sweep"]
    for kelvin in (1.0, 2.0, 4.0):
        for number in range(400):
            field = 1 / (1 / 3 - number / 399 * (1 / 3 - 1 / 10))
            x = 14.69 * 0.1 * kelvin / field
            wave = x / sinh(x) * exp(-14.69 * 0.1 * 2 / field) * cos(2 * pi * 30 / field)
            ohm = 100 + wave + 1e-3 * ((number * 7919) % 101 - 50) / 50
            rows.append(f"{field},{kelvin},{ohm},{field * 50},{kelvin}")
    (tmp_path / "table.csv").write_text("\n".join(rows), encoding="utf-8")
    found = json.loads(nightfield("analyse", "table.csv", "--json", place=tmp_path).stdout)
    assert found["orbits"][0]["frequency_t"] == pytest.approx(30, rel=0.01)
    assert found["orbits"][0]["mass"] == pytest.approx(0.1, rel=0.05)
    assert set(found["hall"]) == {
        "density_m2",
        "density_sd_m2",
        "mobility_m2_per_vs",
        "mobility_sd_m2_per_vs",
    }


def test_a_result_that_cannot_be_written_is_one_message(tmp_path: Path) -> None:
    """A full disk, or a pipe whose reader has gone, is no fault to show a traceback for."""
    if not Path("/dev/full").exists():
        pytest.skip("this system has no /dev/full")
    with Path("/dev/full").open("w", encoding="utf-8") as full:
        for words in (("forecast",), ("forecast", "--json"), ("new", "mine")):
            failed = subprocess.run(
                [sys.executable, "-m", "orchestrator.cli.main", *words],
                cwd=tmp_path,
                stdout=full,
                stderr=subprocess.PIPE,
                text=True,
                check=False,
                env=_environment(),
            )
            assert failed.returncode == 1
            assert "No space left" in failed.stderr
            assert "Traceback" not in failed.stderr
            assert "Exception ignored" not in failed.stderr


@pytest.mark.parametrize("columns", ["80", "60"])
def test_the_forecast_breaks_no_word_on_a_small_terminal(tmp_path: Path, columns: str) -> None:
    done = subprocess.run(
        [sys.executable, "-m", "orchestrator.cli.main", "forecast"],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=True,
        env=_environment() | {"COLUMNS": columns},
    )
    assert "on lantern-cellar" in done.stdout
    assert "…" not in done.stdout
    assert max(len(line) for line in done.stdout.splitlines()) <= int(columns)
    if columns == "80":
        assert "54 % samples per period\n" in done.stdout.replace(" \n", "\n")


def test_an_output_without_unicode_gets_signs_spelt_out(tmp_path: Path) -> None:
    """A locale of plain ASCII is common on the computers beside a cryostat."""
    done = subprocess.run(
        [sys.executable, "-m", "orchestrator.cli.main", "forecast"],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=True,
        env=_environment() | {"PYTHONIOENCODING": "ascii", "LC_ALL": "C"},
    )
    assert "29 m^3 of gas" in " ".join(done.stdout.split())
    assert "?" not in done.stdout


def test_new_writes_files_that_rehearse_and_writes_nothing_over(tmp_path: Path) -> None:
    nightfield("new", "mine", place=tmp_path)
    mine = {file.name for file in (tmp_path / "mine").iterdir()}
    assert mine == {"rig.toml", "evening.toml", "overnight.toml", "world.toml"}
    nightfield("forecast", "mine/evening.toml", "--rig", "mine/rig.toml", place=tmp_path)
    refused = nightfield("new", "mine", place=tmp_path, code=2)
    assert "already" in refused.stderr


def test_run_refuses_without_the_facilitys_rules(tmp_path: Path) -> None:
    nightfield("new", "mine", place=tmp_path)
    words = ("run", "mine/evening.toml", "--rig", "mine/rig.toml")
    refused = nightfield(*words, place=tmp_path, code=2)
    assert "facility.rules" in refused.stderr
    assert "rig.toml, line" in refused.stderr
    assert "second line, never the first" in refused.stderr
    assert not (tmp_path / "nights").exists()


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (("rehearse", "absent.toml"), "absent.toml: cannot be read"),
        (("rehearse", "--pace", "0"), "--pace 0 is not allowed"),
        (("rehearse", "--rig", "bad.toml"), "bad.toml, line 1"),
        (("analyse", "absent.csv"), "absent.csv"),
        (("watch", "absent"), "absent"),
        (("park", "absent", "--reason", "x"), "absent"),
        (("watch", "--broker", "somewhere"), "--broker"),
    ],
)
def test_bad_input_gets_one_message_and_code_2(
    tmp_path: Path, words: tuple[str, ...], said: str
) -> None:
    (tmp_path / "bad.toml").write_text("field = \n", encoding="utf-8")
    failed = nightfield(*words, place=tmp_path, code=2)
    assert said in failed.stderr
    assert "Traceback" not in failed.stderr
    assert failed.stdout == ""


@pytest.mark.parametrize(
    "command",
    [
        "new",
        "forecast",
        "rehearse",
        "run",
        "watch",
        "hold",
        "park",
        "acknowledge",
        "analyse",
        "simulate",
    ],
)
def test_every_command_has_help_with_an_example(tmp_path: Path, command: str) -> None:
    shown = nightfield(command, "--help", place=tmp_path).stdout
    assert "Example: nightfield" in shown
