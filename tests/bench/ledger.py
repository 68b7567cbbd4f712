"""Putting readings on disk: batched as in a rehearsal, and synced as in a live night."""

import itertools
import tempfile
from pathlib import Path

from orchestrator.ledger.writing import CommitMode, Ledger
from tests.bench.outcome import Outcome
from tests.bench.timing import in_turn, timed
from tests.ledger.invented import CHANNELS, DESCRIPTION, reading


def run(quick: bool) -> Outcome:
    """Appends of readings, and commits that are on the disk."""
    count, rounds = (1000, 3) if quick else (10_000, 7)
    first, second = itertools.count(1), itertools.count(1)

    with tempfile.TemporaryDirectory() as place:

        def made(name: str, commit: CommitMode) -> Ledger:
            return Ledger.create(
                Path(place, name),
                description=DESCRIPTION,
                channels=CHANNELS,
                commit=commit,
                clock=lambda: 0.0,
                wall=lambda: 0.0,
            )

        batched, synced = made("batched", "batched"), made("synced", "each_second")

        def append() -> None:
            for _ in range(count):
                batched.append_reading(reading(next(first)))

        def commit() -> None:
            for _ in range(count // 100):
                synced.append_reading(reading(next(second)))
                synced.commit()

        spent = in_turn({"append": timed(append), "commit": timed(commit)}, rounds)
        batched.close()
        synced.close()
    return Outcome(
        {
            "ledger, us to append a reading": spent["append"].per(count),
            "ledger, us to append and sync a reading": spent["commit"].per(count // 100),
        }
    )
