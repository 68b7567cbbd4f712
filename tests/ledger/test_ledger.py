"""The ledger keeps what it was given, gives it back the same, and says plainly when it cannot."""

import math
import sqlite3
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from orchestrator.ledger.reading import NightReader, open_night
from orchestrator.ledger.requests import write_request
from orchestrator.ledger.schema import LedgerError
from orchestrator.ledger.writing import CommitMode, Ledger
from orchestrator.readings import Channel, Reading
from tests.ledger.invented import CHANNELS, DESCRIPTION, reading


class Hand:
    """A clock that moves by hand."""

    def __init__(self) -> None:
        self.now_s = 0.0

    def __call__(self) -> float:
        return self.now_s


def ledger(folder: Path, clock: Hand, commit: CommitMode = "each_second") -> Ledger:
    return Ledger.create(
        folder,
        description=DESCRIPTION,
        channels=CHANNELS,
        commit=commit,
        clock=clock,
        wall=lambda: 1.9e9 + clock(),
    )


def same(one: Reading, other: Reading) -> bool:
    values = all(
        one.values[n] == other.values[n]
        or (math.isnan(one.values[n]) and math.isnan(other.values[n]))
        for n in one.values.keys() | other.values.keys()
    )
    return values and replace(one, values={}) == replace(other, values={})


def test_everything_written_is_read_back_the_same(tmp_path: Path) -> None:
    """Readings with NaN and silent instruments, commands, events, findings, checkpoint, night."""
    clock = Hand()
    with ledger(tmp_path, clock) as night:
        for number in range(1, 30):
            clock.now_s = number * 0.1
            night.append_reading(reading(number))
        night.append_command(
            instrument="magnet",
            operation="write_target",
            value=1.25,
            sent="SOUR:FIEL:TARG 1.25",
            read_back=None,
            verdict="failed",
            reason="no answer",
        )
        night.append_event(
            kind="trip",
            name="stage_silent",
            severity="high",
            text="the stage did not answer",
            data={"margin": math.nan, "age_s": np.float64(3.5), "channels": ("sample_k",)},
        )
        night.append_finding(source="analyst", data={"orbits": []})
        night.checkpoint({"step": 3})
        night.checkpoint({"step": 4})
    with NightReader(tmp_path) as reader:
        back = reader.readings()
        assert len(back) == 29
        assert all(same(one, reading(one.number)) for one in back)
        assert [one.number for one in reader.readings(after=10, limit=3)] == [11, 12, 13]
        assert reader.description() == DESCRIPTION
        assert reader.channels() == CHANNELS
        assert reader.last_number() == 29
        (command,) = reader.commands()
        assert (command.value, command.verdict, command.reading_number) == (1.25, "failed", 29)
        assert math.isnan(command.read_back)
        (event,) = reader.events()
        assert event.data == {"margin": None, "age_s": 3.5, "channels": ["sample_k"]}
        assert (event.kind, event.time_s, event.unix_s) == ("trip", clock(), 1.9e9 + clock())
        assert reader.findings()[0].data == {"orbits": []}
        checkpoint = reader.last_checkpoint()
        assert checkpoint is not None
        assert checkpoint.data == {"step": 4}


def test_live_readings_are_committed_within_a_second_and_events_at_once(tmp_path: Path) -> None:
    """A reader beside the writer sees what the promise says, while the night runs."""
    clock = Hand()
    night, reader = ledger(tmp_path, clock), NightReader(tmp_path)
    for number in range(1, 101):
        clock.now_s = number * 0.1
        night.append_reading(reading(number))
        assert clock.now_s - reader.last_number() * 0.1 <= 0.5 + 1e-9
        assert reader.last_number() == night.committed_number
    night.append_reading(reading(101))
    clock.now_s += 0.4
    assert night.pending_requests() == []
    assert night.committed_number == 100
    clock.now_s += 0.2
    assert night.pending_requests() == []
    assert night.committed_number == 101
    night.append_event(kind="step", name="hold")
    assert [event.name for event in reader.events()] == ["hold"]
    assert night.commits < 30
    night.close()


def test_batched_rows_wait_for_the_batch_or_for_close(tmp_path: Path) -> None:
    """A rehearsal at full speed writes few large transactions, and loses nothing at its end."""
    night, reader = ledger(tmp_path, Hand(), "batched"), NightReader(tmp_path)
    for number in range(1, 4100):
        night.append_reading(reading(number))
    night.append_event(kind="step", name="end")
    assert (reader.last_number(), night.last_number, night.commits) == (4000, 4099, 1)
    night.close()
    assert (reader.last_number(), len(reader.events())) == (4099, 1)


def test_append_reading_batched_costs_little(tmp_path: Path) -> None:
    """Forty channels, 20,000 readings: the best run stays far below a sampling period."""
    channels = [Channel(f"lock{i}_{j}_v", "V", f"lock{i}") for i in range(10) for j in range(4)]
    values, taken = {c.name: 1.23456789e-6 for c in channels}, {f"lock{i}": 1.5 for i in range(10)}
    night = Ledger.create(
        tmp_path,
        description=DESCRIPTION,
        channels=channels,
        commit="batched",
        clock=lambda: 0.0,
        wall=lambda: 0.0,
    )
    best_s = math.inf
    for run in range(5):
        begun_s = time.perf_counter()
        for number in range(run * 4000 + 1, run * 4000 + 4001):
            night.append_reading(Reading(number, 0.0, 0.0, "sweep", values, taken))
        best_s = min(best_s, (time.perf_counter() - begun_s) / 4000)
    night.close()
    assert best_s < 150e-6


def test_same_appends_give_the_same_fingerprint_whatever_the_wall_time(tmp_path: Path) -> None:
    """One value, one step name or one taken time changed gives another."""

    def fingerprint(
        folder: str, commit: CommitMode, unix_s: float, change: dict[str, object]
    ) -> str:
        with ledger(tmp_path / folder, Hand(), commit) as night:
            for number in range(1, 60):
                one = reading(number, unix_s)
                night.append_reading(replace(one, **change) if number == 35 else one)  # type: ignore[arg-type]
        with NightReader(tmp_path / folder) as reader:
            return reader.fingerprint()

    first = fingerprint("a", "batched", 1.9e9, {})
    assert fingerprint("b", "each_second", 2.0e9, {}) == first
    values = dict(reading(35).values)
    values["field_t"] = math.nextafter(values["field_t"], 1.0)
    others = [
        fingerprint("c", "batched", 1.9e9, {"values": values}),
        fingerprint("d", "batched", 1.9e9, {"step": "sweep"}),
        fingerprint("e", "batched", 1.9e9, {"taken_s": {}}),
    ]
    assert len({first, *others}) == 4


def test_reading_is_refused_when_it_leaves_a_gap_or_names_what_the_rig_lacks(
    tmp_path: Path,
) -> None:
    """The refused reading changes nothing: the right one still follows."""
    with ledger(tmp_path, Hand()) as night:
        night.append_reading(reading(1))
        with pytest.raises(LedgerError, match="reading 3 does not follow reading 1"):
            night.append_reading(reading(3))
        strange = replace(reading(2), values={"filed_t": 1.0})
        with pytest.raises(LedgerError, match="filed_t, unknown to the rig"):
            night.append_reading(strange)
        night.append_reading(replace(reading(2), values={}, taken_s={}))
    back = NightReader(tmp_path).readings(after=1)
    assert all(math.isnan(value) for value in back[0].values.values())
    assert back[0].taken_s == {}


@pytest.mark.parametrize(
    ("names", "text"),
    [
        (["field t"], "field t"),
        (['x"); DROP TABLE night; --'], "cannot be a column"),
        (["1st_v"], "1st_v"),
        ([""], "cannot be a column"),
        (["a_v" * 30], "at most 63"),
        (["µ_v"], "cannot be a column"),
        (["x_v\n"], "cannot be a column"),
        (["x_v", "X_V"], "column 'x_v'"),
        (["x_v", "x_v"], "column 'x_v'"),
        (["Step"], "the ledger's own column"),
        (["rowid"], "the ledger's own column"),
        (["box_taken_s"], "column 'box_taken_s'"),
        ([], "at least one channel"),
    ],
)
def test_channel_that_cannot_be_a_column_is_refused(
    tmp_path: Path, names: list[str], text: str
) -> None:
    """No file is left behind."""
    with pytest.raises(LedgerError, match=text):
        Ledger.create(
            tmp_path,
            description=DESCRIPTION,
            channels=[Channel(name, "V", "box") for name in names],
            commit="batched",
            clock=Hand(),
            wall=Hand(),
        )
    assert list(tmp_path.iterdir()) == []


def test_keyword_of_sql_is_a_channel_like_any_other(tmp_path: Path) -> None:
    """Column names are quoted everywhere."""
    channels = [Channel("select", "V", "order"), Channel("group", "V", "order")]
    night = Ledger.create(
        tmp_path,
        description=DESCRIPTION,
        channels=channels,
        commit="batched",
        clock=Hand(),
        wall=Hand(),
    )
    night.append_reading(Reading(1, 0.0, 0.0, "x", {"select": 1.0, "group": 2.0}, {"order": 3.0}))
    night.close()
    (back,) = NightReader(tmp_path).readings()
    assert (back.values, back.taken_s) == ({"select": 1.0, "group": 2.0}, {"order": 3.0})


def test_ledger_is_never_written_over(tmp_path: Path) -> None:
    """A second night in the same folder is refused."""
    ledger(tmp_path, Hand()).close()
    with pytest.raises(LedgerError, match="never written over"):
        ledger(tmp_path, Hand())


def test_file_that_is_no_ledger_is_refused_in_plain_words(tmp_path: Path) -> None:
    """Missing, garbled, empty, cut short, foreign, and of a later format."""
    with pytest.raises(LedgerError, match="there is no ledger at"):
        NightReader(tmp_path)
    file = tmp_path / "night.sqlite"
    file.write_bytes(b"not a database at all, but long enough to look at " * 50)
    with pytest.raises(LedgerError, match="cannot be read as a ledger"):
        NightReader(file)
    with pytest.raises(LedgerError, match="cannot be read as a ledger"):
        write_request(file, "hold", name="", reason="", person="", unix_s=0.0)
    file.write_bytes(b"")
    with pytest.raises(LedgerError, match="not the ledger of a night"):
        open_night(file)
    file.unlink()
    with ledger(tmp_path, Hand(), "batched") as night:
        for number in range(1, 2000):
            night.append_reading(reading(number))
    whole = file.read_bytes()
    file.write_bytes(whole[: len(whole) // 2])
    with pytest.raises(LedgerError, match="cannot be read as a ledger"):
        NightReader(file).readings()
    file.write_bytes(whole)
    connection = sqlite3.connect(file)
    connection.execute("PRAGMA user_version = 99")
    connection.close()
    with pytest.raises(LedgerError, match="ledger format 99"):
        NightReader(file)


def test_open_night_gives_a_dataset_with_units(tmp_path: Path) -> None:
    """Values as appended, NaN for silence, units on every variable."""
    with ledger(tmp_path, Hand(), "batched") as night:
        for number in range(1, 101):
            night.append_reading(reading(number))
    data = open_night(tmp_path)
    assert data.sizes == {"number": 100}
    units = {
        name: data[name].attrs["units"] for name in data.variables if name not in ("number", "step")
    }
    assert units == {
        "field_t": "T",
        "quench": "1",
        "sample_k": "K",
        "rxx_x_v": "V",
        "magnet_taken_s": "s",
        "stage_taken_s": "s",
        "rxx_taken_s": "s",
        "time_s": "s",
        "unix_s": "s",
    }
    assert np.array_equal(data["field_t"], 0.001 * np.arange(1, 101))
    silent = np.arange(1, 101) % 7 == 0
    assert np.array_equal(np.isnan(data["sample_k"]), silent)
    assert np.array_equal(np.isnan(data["stage_taken_s"]), silent)
    assert data.sel(number=50)["step"].item() == "sweep 1"
    assert (data.attrs["night"], data.attrs["seed"]) == ("2031-04-05-a", 7)


def test_open_night_of_a_night_without_readings_is_empty(tmp_path: Path) -> None:
    """A night that ended before its first reading still opens."""
    ledger(tmp_path, Hand()).close()
    assert open_night(tmp_path).sizes == {"number": 0}
