"""Live nights on sockets, with broker and analyst in processes of their own that may die."""

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import psutil  # type: ignore[import-untyped]
import pytest

from orchestrator.ledger.reading import NightReader
from tests.nights.rehearsing import TINY

ROOT = Path(__file__).parents[2]
PACE = "20"
SHORT = (
    TINY.replace('["0.6 K", "1 K"]', '["0.5 K"]')
    .replace("5.5 T", "1.0 T")
    .replace("6.5 T", "1.6 T")
)


def start(*words: str, place: Path, own_group: bool = False) -> "subprocess.Popen[str]":
    return subprocess.Popen(
        [sys.executable, "-m", "orchestrator.cli.main", *words],
        cwd=place,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=own_group,
    )


@pytest.fixture
def simulated(tmp_path: Path) -> Iterator[Path]:
    """A folder with live.toml, whose rig is served on sockets by `nightfield simulate`."""
    process = start("simulate", "--write-rig", "live.toml", "--pace", PACE, place=tmp_path)
    try:
        end_s = time.monotonic() + 60
        while not (tmp_path / "live.toml").exists():
            assert time.monotonic() < end_s
            assert process.poll() is None, process.stderr
            time.sleep(0.1)
        (tmp_path / "tiny.toml").write_text(SHORT, encoding="utf-8")
        yield tmp_path
    finally:
        process.send_signal(signal.SIGINT)
        out, _ = process.communicate(timeout=20)
        assert "stopped" in out
        assert process.returncode == 0


def wait_for_step(place: Path, step: str, night: "subprocess.Popen[str]") -> Path:
    end_s = time.monotonic() + 120
    while time.monotonic() < end_s:
        assert night.poll() is None, night.communicate()
        for file in place.glob("nights/*/night.sqlite"):
            with NightReader(file) as reader:
                if any(one.name == step for one in reader.events()):
                    return file
        time.sleep(0.2)
    raise AssertionError(f"{step} did not come")


def kill_children(pid: int, *modules: str) -> int:
    killed = 0
    for child in psutil.Process(pid).children(recursive=True):
        line = " ".join(child.cmdline())
        if any(module in line for module in modules):
            child.kill()
            killed += 1
    return killed


def finish(night: "subprocess.Popen[str]") -> dict[str, Any]:
    out, error = night.communicate(timeout=240)
    assert night.returncode == 0, error
    found: dict[str, Any] = json.loads(out)
    return found


def test_a_live_night_survives_the_loss_of_analyst_and_broker(simulated: Path) -> None:
    words = ("run", "tiny.toml", "--rig", "live.toml", "--pace", PACE, "--json")
    night = start(*words, place=simulated)
    wait_for_step(simulated, "sweep-1-approach", night)
    assert kill_children(night.pid, "orchestrator.analysis.analyst") == 1
    wait_for_step(simulated, "sweep-1", night)
    assert kill_children(night.pid, "orchestrator.stream.broker") == 1
    done = finish(night)
    assert done["outcome"] == "done"
    assert done["trips"] == []
    assert done["violations"] == []
    assert "truth" not in done
    with NightReader(simulated / done["night"]) as reader:
        assert reader.description().mode == "live"
        numbers = [one.number for one in reader.readings()]
        assert numbers == list(range(1, done["readings"] + 1))
        steps = {one.name for one in reader.events() if one.kind == "step"}
        assert {"ready", "ladder-1-settle", "sweep-1", "park"} <= steps


def test_ctrl_c_parks_the_rig(simulated: Path) -> None:
    words = ("run", "tiny.toml", "--rig", "live.toml", "--pace", PACE, "--json")
    night = start(*words, place=simulated)
    file = wait_for_step(simulated, "sweep-1-approach", night)
    night.send_signal(signal.SIGINT)
    out, error = night.communicate(timeout=120)
    assert night.returncode == 3, error
    assert json.loads(out)["outcome"] == "park"
    with NightReader(file) as reader:
        answered = [one for one in reader.readings() if "magnet" in one.taken_s]
        assert abs(answered[-1].values["field_t"]) < 1e-3


@pytest.mark.skipif(os.name != "posix", reason="a terminal's Ctrl-C is sent in another way")
def test_ctrl_c_in_a_terminal_leaves_the_processes_beside_the_night_alone(tmp_path: Path) -> None:
    """A terminal sends the signal to its whole group; the rig must still be there to be parked."""
    (tmp_path / "tiny.toml").write_text(SHORT, encoding="utf-8")
    words = ("rehearse", "tiny.toml", "--pace", PACE, "--json")
    night = start(*words, place=tmp_path, own_group=True)
    wait_for_step(tmp_path, "sweep-1-approach", night)
    os.killpg(night.pid, signal.SIGINT)
    out, error = night.communicate(timeout=120)
    assert night.returncode == 3, error
    assert [one["name"] for one in json.loads(out)["trips"]] == ["park"]
    assert "the rig is parked" in error
    assert "Fatal" not in error


def test_an_instrument_that_does_not_answer_is_told_before_the_night(simulated: Path) -> None:
    rig = (simulated / "live.toml").read_text(encoding="utf-8")
    (simulated / "dead.toml").write_text(
        rig.replace("127.0.0.1::", "127.0.0.1::1", 1), encoding="utf-8"
    )
    night = start("run", "tiny.toml", "--rig", "dead.toml", place=simulated)
    _, error = night.communicate(timeout=60)
    assert night.returncode == 2
    assert "magnet at TCPIP" in error
