"""Nights with faults: each trips what it should, is recorded, and leaves the rig safe."""

import sqlite3
from pathlib import Path
from typing import Any

import pytest

from orchestrator.cli.failing import Failed
from orchestrator.engine.sampler import Sampler
from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.requests import write_request
from orchestrator.ledger.writing import Ledger
from simulators.world import World
from tests.nights.rehearsing import TINY, rehearse

RAMPING_S = 500.0  # the tiny night is on its way to its first sweep


def test_a_night_without_faults_is_done_and_parked(tmp_path: Path) -> None:
    night = rehearse(tmp_path)
    assert (night.done.outcome, night.done.parked) == ("done", "parked")
    assert night.trips == []
    assert night.violations == []
    assert abs(night.world.coil.coil_t) < 1e-3
    names = [step.name for step in night.done.steps]
    assert names == [
        "ready",
        "ladder-1-settle",
        "sweep-1",
        "ladder-2-settle",
        "sweep-2",
        "park",
    ]


def test_a_quench_is_never_answered_with_a_ramp(tmp_path: Path) -> None:
    night = rehearse(
        tmp_path, faults=lambda world, panels, loop: loop.call_at(RAMPING_S, world.quench)
    )
    assert night.done.outcome in ("quench-flag", "current-collapse", "unexplained-voltage")
    assert "quench-flag" in night.trips
    tripped_s = next(one.time_s for one in night.reader.events() if one.kind == "trip")
    assert RAMPING_S <= tripped_s <= RAMPING_S + 2
    later = [
        one
        for one in night.reader.commands()
        if one.time_s > tripped_s and one.verdict != "refused"
    ]
    assert not [
        one for one in later if one.instrument == "magnet" and one.operation != "switch_heater"
    ]
    assert [one.operation for one in later if one.instrument == "stage"] == ["heater"] * len(
        [one for one in later if one.instrument == "stage"]
    )
    assert night.violations == []
    assert "not ramped to zero" in night.done.parked


def test_a_current_that_collapses_without_a_flag_is_a_quench(tmp_path: Path) -> None:
    def quench_in_silence(world, panels, loop):  # type: ignore[no-untyped-def]
        # The supply does not notice: its questionable condition always reads 0.
        panel = panels["magnet"]
        inner = panel.panel.execute

        def blind(line: str) -> str | None:
            reply = inner(line)
            if reply is not None and "STAT:QUES:COND?" in line and reply.endswith("512"):
                return reply[:-3] + "0"
            return reply.replace(";512;", ";0;") if reply else reply

        panel.panel.execute = blind
        loop.call_at(RAMPING_S, world.quench)

    night = rehearse(tmp_path, faults=quench_in_silence)
    assert night.done.outcome in ("current-collapse", "unexplained-voltage")
    assert "quench-flag" not in night.trips
    assert night.violations == []


@pytest.mark.parametrize("instrument", ["rxx", "stage", "helium"])
def test_a_silent_instrument_parks_the_rig_within_a_bounded_time(
    tmp_path: Path, instrument: str
) -> None:
    def fall_silent(world, panels, loop):  # type: ignore[no-untyped-def]
        loop.call_at(RAMPING_S, lambda: setattr(panels[instrument], "deaf", True))

    night = rehearse(tmp_path, faults=fall_silent)
    assert night.done.outcome == f"stale-{instrument}"
    tripped_s = next(one.time_s for one in night.reader.events() if one.kind == "trip")
    assert RAMPING_S + 9 <= tripped_s <= RAMPING_S + 13
    assert abs(night.world.coil.coil_t) < 1e-3
    assert night.violations == []


def test_a_silent_magnet_is_told_to_a_person_and_nothing_is_assumed(tmp_path: Path) -> None:
    def fall_silent(world, panels, loop):  # type: ignore[no-untyped-def]
        loop.call_at(RAMPING_S, lambda: setattr(panels["magnet"], "deaf", True))

    night = rehearse(tmp_path, faults=fall_silent)
    assert night.done.outcome == "stale-magnet"
    assert "not ramped to zero" in night.done.parked
    parked = [one for one in night.reader.events() if one.name == "park"][-1]
    assert parked.severity == "high"


def test_a_write_that_is_ignored_trips_at_the_read_back(tmp_path: Path) -> None:
    def ignore(world, panels, loop):  # type: ignore[no-untyped-def]
        panels["stage"].ignores_writes = True

    night = rehearse(tmp_path, faults=ignore)
    assert night.done.outcome.startswith("read-back-stage")
    mismatches = [one for one in night.reader.commands() if one.verdict == "mismatch"]
    assert mismatches
    assert night.violations == []


def make_deaf(names: tuple[str, ...], for_s: float):  # type: ignore[no-untyped-def]
    def faults(world, panels, loop):  # type: ignore[no-untyped-def]
        for name in names:
            loop.call_at(RAMPING_S, setattr, panels[name], "deaf", True)
            loop.call_at(RAMPING_S + for_s, setattr, panels[name], "deaf", False)

    return faults


def test_a_network_that_comes_back_finds_the_night_still_trying_to_park(tmp_path: Path) -> None:
    night = rehearse(tmp_path, faults=make_deaf(("magnet", "stage"), 300.0))
    assert night.done.outcome.startswith("stale-")
    assert night.done.parked == "parked"
    assert abs(night.world.coil.coil_t) < 1e-3
    assert not night.world.stage.heater_on
    assert [one.name for one in night.reader.events() if one.name == "park-again"]
    assert night.violations == []


def test_a_magnet_that_never_answers_again_is_told_after_half_an_hour_and_its_switch_let_alone(
    tmp_path: Path,
) -> None:
    night = rehearse(tmp_path, faults=make_deaf(("magnet",), 1e6))
    assert "the magnet was not ramped to zero" in night.done.parked
    assert RAMPING_S + 1800 < night.done.duration_s < RAMPING_S + 2400
    assert not night.world.stage.heater_on
    switch = [one for one in night.reader.commands() if one.operation == "switch_heater"]
    assert [one.value for one in switch] == [1.0]
    assert night.violations == []


def test_low_helium_parks_the_rig(tmp_path: Path) -> None:
    def run_low(world, panels, loop):  # type: ignore[no-untyped-def]
        panels["helium"].replies = {":MEAS:LEV?": "2.0E+01"}
        panels["helium"].replies |= {"MEAS:LEV?": "2.0E+01"}

    night = rehearse(tmp_path, faults=run_low)
    assert night.done.outcome == "level-helium"
    assert night.done.parked == "parked"
    assert night.violations == []


def test_a_warm_stage_parks_the_rig_with_its_heater_off(tmp_path: Path) -> None:
    def warm(world, panels, loop):  # type: ignore[no-untyped-def]
        inner = panels["stage"].panel.execute

        def hot(line: str) -> str | None:
            reply = inner(line)
            if reply and "TEMP?" in line and loop.time() > RAMPING_S:
                _, *others = reply.split(";")
                return ";".join(["3.5E+01", *others])
            return reply

        panels["stage"].panel.execute = hot

    night = rehearse(tmp_path, faults=warm)
    assert night.done.outcome == "over-temperature"
    heater = [one for one in night.reader.commands() if one.operation == "heater"]
    assert heater[-1].value == 0
    assert abs(night.world.coil.coil_t) < 1e-3


def test_a_person_may_hold_lift_the_hold_and_park(tmp_path: Path) -> None:
    def ask(world, panels, loop):  # type: ignore[no-untyped-def]
        def request(kind: str, name: str = "") -> None:
            folder = next((tmp_path / "nights").iterdir())
            write_request(folder, kind, name=name, reason="filling", person="A. Keeper", unix_s=0.0)

        loop.call_at(RAMPING_S, request, "hold")
        loop.call_at(RAMPING_S + 200, request, "acknowledge", "hold")
        loop.call_at(RAMPING_S + 400, request, "park")

    night = rehearse(tmp_path, faults=ask)
    assert night.done.outcome == "park"
    assert night.done.parked == "parked"
    fields = {round(one.time_s): one.values["field_t"] for one in night.reader.readings()}
    held = [fields[second] for second in range(int(RAMPING_S) + 5, int(RAMPING_S) + 195)]
    assert max(held) - min(held) < 1e-4
    assert abs(fields[int(RAMPING_S) + 300] - held[-1]) > 0.05
    events = [(one.kind, one.name) for one in night.reader.events()]
    assert ("acknowledge", "hold") in events
    assert night.violations == []


def test_a_hold_that_nobody_lifts_ends_in_a_parked_rig(tmp_path: Path) -> None:
    def ask(world, panels, loop):  # type: ignore[no-untyped-def]
        def request() -> None:
            folder = next((tmp_path / "nights").iterdir())
            write_request(folder, "hold", name="", reason="?", person="?", unix_s=0.0)

        loop.call_at(RAMPING_S, request)

    night = rehearse(tmp_path, faults=ask)
    assert night.done.outcome == "hold"
    assert night.done.parked == "parked"
    assert night.done.duration_s > RAMPING_S + 1800


def test_a_settle_that_takes_too_long_parks_if_the_sequence_says_so(tmp_path: Path) -> None:
    text = TINY.replace('"continue"', '"park"').replace('"10 min"', '"30 s"')
    night = rehearse(tmp_path, sequence=text.replace('"20 s"', '"5 min"'))
    assert night.done.outcome == "settle-timeout"
    assert night.done.parked == "parked"


def test_the_same_seed_gives_the_same_night_to_the_byte(tmp_path: Path) -> None:
    def rows(folder: Path) -> list[tuple[object, ...]]:
        found = []
        with sqlite3.connect(folder / "night.sqlite") as connection:
            for table in ("reading", "command", "event", "finding", "checkpoint"):
                found += connection.execute(f"SELECT * FROM {table}").fetchall()
        return found

    nights = []
    for name, seed in (("a", 5), ("b", 5), ("c", 6)):
        (tmp_path / name).mkdir()
        nights.append(rehearse(tmp_path / name, seed=seed))
    first, second, other = nights
    assert rows(first.folder) == rows(second.folder)
    assert first.reader.fingerprint() == second.reader.fingerprint()
    assert first.reader.fingerprint() != other.reader.fingerprint()


def test_an_overloaded_lock_in_is_told_and_does_not_stop_the_night(tmp_path: Path) -> None:
    def overload(world, panels, loop):  # type: ignore[no-untyped-def]
        lock_in = world.lock_ins["rxy"]
        loop.call_at(RAMPING_S, lambda: setattr(lock_in, "full_scale_v", 1e-6))

    night = rehearse(tmp_path, faults=overload)
    assert night.done.outcome == "done"
    warnings = [one for one in night.reader.events() if one.kind == "warning"]
    # Once when it begins, once when it is over: with the field at rest the Hall voltage is gone.
    assert [one.name for one in warnings] == ["overload-rxy", "overload-rxy"]
    assert "lost" in warnings[0].text
    assert "reads again" in warnings[1].text


def test_a_full_disk_parks_the_rig_and_keeps_what_was_accepted(tmp_path: Path) -> None:
    """SQLite's own limit of pages stands for a disk that is full: the same error, SQLITE_FULL."""
    ledgers: list[Ledger] = []
    whole = Ledger.create.__func__  # type: ignore[attr-defined]

    def small(cls: type[Ledger], folder: Path, **words: Any) -> Ledger:
        ledger: Ledger = whole(cls, folder, **words | {"commit": "each_second"})
        ledger._connection.execute("PRAGMA max_page_count = 60")
        ledgers.append(ledger)
        return ledger

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(Ledger, "create", classmethod(small))
        worlds: list[World] = []
        with pytest.raises(Failed, match=r"could not be written, .* readings wait: .* full") as end:
            rehearse(tmp_path, faults=lambda world, panels, loop: worlds.append(world))
    assert end.value.code == 3
    assert "the rig: parked" in str(end.value)
    assert abs(worlds[0].coil.coil_t) < 1e-3
    kept = ledgers[0].committed_number
    with NightReader(ledgers[0].path) as reader:
        assert kept > 100
        assert [one.number for one in reader.readings()] == list(range(1, kept + 1))


def test_a_fault_of_the_program_itself_parks_the_rig(tmp_path: Path) -> None:
    def stumble(work: object, planned: object) -> None:
        raise ZeroDivisionError("a mistake of ours")

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("orchestrator.engine.night.sweep_field", stumble)
        night = rehearse(tmp_path)
    assert (night.done.outcome, night.done.parked) == ("program-fault", "parked")
    (trip,) = [one for one in night.reader.events() if one.kind == "trip"]
    assert trip.text == "ZeroDivisionError: a mistake of ours"
    (warning,) = [one for one in night.reader.events() if one.name == "program-fault"][:1]
    assert "Traceback" in warning.text
    assert abs(night.world.coil.coil_t) < 1e-3
    assert night.violations == []


def test_a_sampler_that_fails_is_started_anew_to_park(tmp_path: Path) -> None:
    def fail_later(world, panels, loop):  # type: ignore[no-untyped-def]
        loop.call_at(RAMPING_S, lambda: setattr(Sampler, "_poll", broken_once))

    usual = Sampler._poll

    async def broken_once(self: Sampler) -> Any:
        Sampler._poll = usual  # type: ignore[method-assign]
        raise RuntimeError("the poll stumbled")

    night = rehearse(tmp_path, faults=fail_later)
    assert (night.done.outcome, night.done.parked) == ("program-fault", "parked")
    assert abs(night.world.coil.coil_t) < 1e-3
