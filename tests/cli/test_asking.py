"""What a person asks of a night from the command line: taken, or refused with the reason."""

import json
import os
import signal
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from orchestrator.cli.claims import claim_file, claimed
from orchestrator.cli.failing import Failed
from orchestrator.ledger.reading import NightReader
from tests.cli.test_commands import nightfield
from tests.nights.test_live import SHORT, start, wait_for_step

PACE = "3"  # a loaded computer must not make a reading stale


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str]:
    """A folder, and the night that was rehearsed in it to its end."""
    place = tmp_path_factory.mktemp("finished")
    (place / "tiny.toml").write_text(SHORT, encoding="utf-8")
    found: dict[str, Any] = json.loads(
        nightfield("rehearse", "tiny.toml", "--json", place=place).stdout
    )
    return place, found["night"]


@pytest.mark.parametrize("words", [("hold",), ("park",), ("acknowledge", "hold")])
def test_a_request_to_a_night_that_has_ended_is_refused(
    finished: tuple[Path, str], words: tuple[str, ...]
) -> None:
    place, night = finished
    command, *rest = words
    refused = nightfield(command, night, *rest, "--reason", "x", place=place, code=2)
    assert "this night has ended" in refused.stderr
    with NightReader(place / night) as reader:
        assert reader.requests() == []


def test_a_request_without_a_reason_is_refused(finished: tuple[Path, str]) -> None:
    place, night = finished
    assert "say why" in nightfield("hold", night, "--reason", " ", place=place, code=2).stderr


@pytest.fixture(scope="module")
def running(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Path, Path, int]]:
    """A folder with live.toml, the folder of a night that runs on that rig, and its process."""
    place = tmp_path_factory.mktemp("running")
    (place / "tiny.toml").write_text(SHORT, encoding="utf-8")
    rig = start("simulate", "--write-rig", "live.toml", "--pace", PACE, place=place)
    night = None
    try:
        end_s = time.monotonic() + 60
        while not (place / "live.toml").exists():
            assert time.monotonic() < end_s
            time.sleep(0.1)
        night = start("run", "tiny.toml", "--rig", "live.toml", "--pace", PACE, place=place)
        yield place, wait_for_step(place, "ready", night).parent, night.pid
    finally:
        if night is not None:
            night.kill()
            night.communicate(timeout=20)
        rig.send_signal(signal.SIGINT)
        rig.communicate(timeout=20)


def test_a_second_night_on_the_same_rig_is_refused_and_moves_nothing(
    running: tuple[Path, Path, int],
) -> None:
    place, night, _ = running
    words = ("run", "tiny.toml", "--rig", "live.toml", "--pace", PACE)
    refused = nightfield(*words, place=place, code=2)
    assert "is in use by night" in refused.stderr
    assert night.name in refused.stderr
    assert len(list((place / "nights").iterdir())) == 1
    with NightReader(night) as reader:
        assert [one.name for one in reader.events() if one.kind == "trip"] == []


@pytest.mark.skipif(os.name != "posix", reason="there is no such signal")
def test_a_terminal_that_is_closed_ends_no_night(running: tuple[Path, Path, int]) -> None:
    """A cut connection must not leave a magnet at field with nobody watching."""
    _, night, process = running
    os.kill(process, signal.SIGHUP)
    with NightReader(night) as reader:
        before, end_s = reader.last_number(), time.monotonic() + 30
        while reader.last_number() < before + 3:
            assert time.monotonic() < end_s
            time.sleep(0.1)
        assert [one.name for one in reader.events() if one.kind == "trip"] == []


def test_only_a_trip_that_stands_can_be_acknowledged(running: tuple[Path, Path, int]) -> None:
    place, night, _ = running
    held = nightfield("hold", str(night), "--reason", "filling nitrogen", place=place)
    assert "the night has taken it up" in held.stdout
    words = ("acknowledge", str(night), "hould", "--reason", "filled")
    end_s = time.monotonic() + 30
    while "standing: hold" not in nightfield(*words, place=place, code=2).stderr:
        assert time.monotonic() < end_s
    nightfield("acknowledge", str(night), "hold", "--reason", "filled", place=place)
    with NightReader(night) as reader:
        assert [one.name for one in reader.requests()] == ["", "hold"]


def test_a_request_to_a_night_whose_process_has_died_is_told_to_be_in_vain(
    running: tuple[Path, Path, int],
) -> None:
    """The worst thing to be told of a magnet at field is that somebody has seen to it."""
    place, night, process = running
    os.kill(process, signal.SIGTERM if os.name == "nt" else signal.SIGKILL)
    failed = nightfield("park", str(night), "--reason", "storm", place=place, code=1)
    assert "nobody has taken request 3 up within 10 s" in failed.stderr
    assert "look after the magnet at its supply" in failed.stderr
    assert "the night has taken it up" not in failed.stdout


def test_a_claim_ends_with_its_night(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    with claimed({"magnet": "TCPIP0::a::1::SOCKET"}) as tell:
        tell("night one")
        both = {"stage": "GPIB0::3::INSTR", "magnet": "tcpip::A::1::socket"}
        in_use = f"in use by night one, process {os.getpid()}"
        with pytest.raises(Failed, match=in_use), claimed(both):
            pass
        with claimed({"stage": "GPIB0::3::INSTR"}):  # let go of by the night that was refused
            pass
    with claimed({"magnet": "TCPIP0::a::1::SOCKET"}):
        assert claim_file("TCPIP0::a::1::SOCKET").parent == tmp_path
