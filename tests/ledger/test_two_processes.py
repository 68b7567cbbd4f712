"""The ledger of a night that is killed, and of a night that another process writes a request to."""

import math
import sqlite3
import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.requests import write_request
from orchestrator.ledger.schema import LedgerError
from orchestrator.ledger.writing import Ledger
from tests.ledger.invented import CHANNELS, DESCRIPTION, reading

_WRITER = """
import sys, time
from orchestrator.ledger.writing import Ledger
from tests.ledger.invented import CHANNELS, DESCRIPTION, reading
night = Ledger.create(sys.argv[1], description=DESCRIPTION, channels=CHANNELS,
    commit="each_second", clock=time.monotonic, wall=time.time)
number = 0
while True:
    number += 1
    night.append_reading(reading(number))
    print(number, time.monotonic(), flush=True)
    time.sleep(0.01)
"""


def test_killed_writer_loses_no_reading_older_than_a_second(tmp_path: Path) -> None:
    """Kill without warning in mid-write: the file opens and only the last second may be missing."""
    writer = subprocess.Popen(
        [sys.executable, "-c", _WRITER, str(tmp_path)], stdout=subprocess.PIPE, text=True
    )
    assert writer.stdout is not None
    lines = [writer.stdout.readline()]
    end_s = time.monotonic() + 1.7
    while time.monotonic() < end_s:
        lines.append(writer.stdout.readline())
    killed_s = time.monotonic()
    writer.kill()
    writer.wait()
    lines += writer.stdout.readlines()
    writer.stdout.close()
    appended = [(int(n), float(s)) for n, s in (line.split() for line in lines if "\n" in line)]
    old = max(number for number, time_s in appended if time_s < killed_s - 1.0)
    with NightReader(tmp_path) as reader:
        assert reader.last_number() >= old
        assert [one.number for one in reader.readings()] == list(range(1, reader.last_number() + 1))
        assert reader.readings(after=old - 1)[0].values == pytest.approx(
            dict(reading(old).values), nan_ok=True
        )


def test_requests_and_the_night_do_not_disturb_each_other(tmp_path: Path) -> None:
    """Fifty requests from another connection while readings flow: all taken, nothing slow."""
    night = Ledger.create(
        tmp_path,
        description=DESCRIPTION,
        channels=CHANNELS,
        commit="each_second",
        clock=lambda: time.monotonic() * 50,  # a commit every 10 ms, to make them meet often
        wall=time.time,
    )
    written: list[int] = []

    def ask() -> None:
        for count in range(50):
            written.append(
                write_request(
                    tmp_path, "hold", name="", reason=f"{count}", person="Ada", unix_s=1.0
                )
            )

    other = threading.Thread(target=ask)
    other.start()
    taken: list[int] = []
    longest_s, number = 0.0, 0
    end_s = time.monotonic() + 15.0
    while (other.is_alive() or len(taken) < 50) and time.monotonic() < end_s:
        number += 1
        begun_s = time.perf_counter()
        night.append_reading(reading(number))
        for request in night.pending_requests():
            night.take_request(request.id, number * 0.1)
            taken.append(request.id)
        longest_s = max(longest_s, time.perf_counter() - begun_s)
    other.join()
    night.close()
    assert taken == written == list(range(1, 51))
    assert longest_s < 1.0
    with NightReader(tmp_path) as reader:
        assert reader.last_number() == number
        assert all(request.taken_s is not None for request in reader.requests())


def test_writer_outlasts_a_foreign_lock_and_then_complains(tmp_path: Path) -> None:
    """Someone holds a write transaction: readings wait, five seconds long, and none is lost."""
    now_s = 0.0
    night = Ledger.create(
        tmp_path,
        description=DESCRIPTION,
        channels=CHANNELS,
        commit="each_second",
        clock=lambda: now_s,
        wall=lambda: now_s,
    )
    foreign = sqlite3.connect(night.path, isolation_level=None)
    foreign.execute("BEGIN IMMEDIATE")
    for number in range(1, 6):
        now_s = float(number)
        night.append_reading(reading(number))
    night.append_event(kind="step", name="hold")
    assert night.committed_number == 0
    with pytest.raises(
        LedgerError, match="could not be written, 5 readings wait: database is locked"
    ):
        night.commit()
    now_s = 8.0
    assert night.failure == ""
    night.append_reading(reading(6))
    assert "6 readings wait" in night.failure
    foreign.execute("ROLLBACK")
    foreign.close()
    assert night.commit() == 6
    assert night.failure == ""
    night.close()
    with NightReader(tmp_path) as reader:
        assert (reader.last_number(), len(reader.events())) == (6, 1)


def test_acknowledgement_needs_name_reason_and_person(tmp_path: Path) -> None:
    """Only a person clears a trip, by its name and with a reason (safety promise 4)."""
    Ledger.create(
        tmp_path,
        description=DESCRIPTION,
        channels=CHANNELS,
        commit="each_second",
        clock=lambda: 0.0,
        wall=lambda: 0.0,
    ).close()
    good = {"name": "helium_low", "reason": "refilled", "person": "Ada"}
    for missing in good:
        with pytest.raises(LedgerError, match=f"needs the {missing}"):
            write_request(tmp_path, "acknowledge", unix_s=0.0, **{**good, missing: " "})
    with pytest.raises(LedgerError, match="'discharge' is not known; there are hold, park"):
        write_request(tmp_path, "discharge", unix_s=0.0, **good)  # type: ignore[arg-type]
    assert write_request(tmp_path, "acknowledge", unix_s=0.0, **good) == 1
    with NightReader(tmp_path) as reader:
        (request,) = reader.requests()
    assert (request.name, request.taken_s, math.isfinite(request.unix_s)) == (
        "helium_low",
        None,
        True,
    )
