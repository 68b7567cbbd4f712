"""Writing a night's ledger, by the one process that runs the night.

Rows wait in memory and go to the file in short transactions, so that another process can write a
request in between. What `Ledger.committed_number` reports, and everything before a `Ledger.commit`
that returned, is on disk.
"""

import contextlib
import sqlite3
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import Any, Literal, Self

from orchestrator.ledger.records import (
    MODES,
    VERDICTS,
    NightDescription,
    RequestRecord,
    Verdict,
)
from orchestrator.ledger.schema import (
    FILE_NAME,
    FORMAT_VERSION,
    LedgerError,
    check_channels,
    connect_to_write,
    create_tables,
    instruments_of,
    reading_columns,
    to_json,
)
from orchestrator.readings import Channel, Reading

CommitMode = Literal["each_second", "batched"]

_BUSY_TIMEOUT_S = 0.2  # the night's loop stands still meanwhile
_PATIENCE_S = 5.0  # of the night's clock: longer than that without a commit is an error
_COMMIT_AFTER_S = 0.5  # half of the promised second, so that a late call is still in time
_BATCH_ROWS = 4000

_INSERT_COMMAND = "INSERT INTO command VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?)"
_INSERT_EVENT = "INSERT INTO event VALUES (?, ?, ?, ?, ?, ?, ?, ?)"
_INSERT_FINDING = "INSERT INTO finding VALUES (?, ?, ?, ?)"
_INSERT_CHECKPOINT = "INSERT INTO checkpoint VALUES (?, ?, ?)"
_TAKE_REQUEST = "UPDATE request SET taken_s = ? WHERE id = ? AND taken_s IS NULL"


class Ledger:
    """The ledger of a running night, open for writing. Make one with `Ledger.create`.

    All calls are synchronous and belong to one thread. With ``commit="each_second"`` commands,
    events, findings, checkpoints and taken requests are on disk when the call returns, and
    readings at the latest a second after they were appended, as long as some method is called at
    least twice a second (`commit_if_due` is there for that). A disk that is full or gone is told
    by `failure`; it stops no one from bringing the night to a safe end.
    """

    def __init__(
        self,
        file: Path,
        connection: sqlite3.Connection,
        channels: Sequence[Channel],
        commit: CommitMode,
        clock: Callable[[], float],
        wall: Callable[[], float],
    ) -> None:
        self._file = file
        self._connection = connection
        self._names = tuple(channel.name for channel in channels)
        self._known = frozenset(self._names)
        self._instruments = instruments_of(channels)
        self._known_instruments = frozenset(self._instruments)
        columns = reading_columns(channels)
        marks = ", ".join("?" * len(columns))
        self._insert_reading = f"INSERT INTO reading ({', '.join(columns)}) VALUES ({marks})"
        self._live = commit == "each_second"
        self._clock = clock
        self._wall = wall
        self._waiting: dict[str, list[tuple[object, ...]]] = {}
        self._readings: list[tuple[object, ...]] = []
        self._last_number = 0
        self._committed_number = 0
        self._ids = {"command": 0, "event": 0, "finding": 0, "checkpoint": 0}
        self._last_commit_s = clock()
        self._waiting_since_s: float | None = None
        self._failure = ""
        self._commits = 0
        self._closed = False

    @classmethod
    def create(
        cls,
        folder: str | Path,
        *,
        description: NightDescription,
        channels: Sequence[Channel],
        commit: CommitMode,
        clock: Callable[[], float],
        wall: Callable[[], float],
    ) -> Self:
        """Make ``night.sqlite`` in a folder, which is made as well if need be.

        Parameters
        ----------
        folder : str or Path
            The night's folder.
        description : NightDescription
            What the night is.
        channels : Sequence[Channel]
            The rig's channels, which become the columns of the readings in this order.
        commit : {"each_second", "batched"}
            ``batched`` is for rehearsals at full speed, which can be had again from their seed.
        clock, wall : Callable[[], float]
            The night's clock in seconds, and the wall time in seconds since 1970.

        Raises
        ------
        LedgerError
            A ledger is there already, a channel name cannot be a column, the folder cannot be
            written.
        """
        if commit not in ("each_second", "batched"):
            raise LedgerError(f"commit {commit!r} is not known; there are each_second, batched")
        if description.mode not in MODES:
            raise LedgerError(
                f"mode {description.mode!r} is not known; there are {', '.join(MODES)}"
            )
        check_channels(channels)
        file = Path(folder) / FILE_NAME
        if file.exists():
            raise LedgerError(f"{file} exists already; a night is never written over")
        # Made under another name first: whoever sees the file sees a whole ledger.
        part = file.with_name(FILE_NAME + ".part")
        try:
            file.parent.mkdir(parents=True, exist_ok=True)
            part.touch(exist_ok=False)
            with contextlib.closing(connect_to_write(part, _BUSY_TIMEOUT_S)) as connection:
                create_tables(connection, channels)
                _write_description(connection, description, channels)
            part.rename(file)
            connection = connect_to_write(file, _BUSY_TIMEOUT_S)
        except (sqlite3.Error, OverflowError, OSError) as error:
            raise LedgerError(f"{file} cannot be made: {error}") from error
        return cls(file, connection, channels, commit, clock, wall)

    @property
    def path(self) -> Path:
        """The ledger's file."""
        return self._file

    @property
    def last_number(self) -> int:
        """Number of the last reading appended; 0 before the first."""
        return self._last_number

    @property
    def committed_number(self) -> int:
        """Number of the last reading that is on disk; 0 before the first."""
        return self._committed_number

    @property
    def commits(self) -> int:
        """How many transactions have been committed."""
        return self._commits

    @property
    def failure(self) -> str:
        """Why the file cannot be written; empty while it can.

        Appending never raises for it: rows wait in memory and are tried again, and whoever runs
        the night must bring it to a safe end.
        """
        return self._failure

    def append_reading(self, reading: Reading) -> None:
        """Append one reading.

        Raises
        ------
        LedgerError
            The number does not follow the last one, or a channel or instrument is not the rig's.
        """
        if reading.number != self._last_number + 1:
            raise LedgerError(
                f"reading {reading.number} does not follow reading {self._last_number}: "
                "numbers have no gaps"
            )
        values, taken = reading.values, reading.taken_s
        if not (values.keys() <= self._known and taken.keys() <= self._known_instruments):
            strange = sorted(
                (values.keys() - self._known) | (taken.keys() - self._known_instruments)
            )
            raise LedgerError(
                f"reading {reading.number} has {', '.join(strange)}, unknown to the rig"
            )
        # SQLite keeps NaN as NULL (sqlite3_bind_double, from memory).
        self._readings.append(
            (
                reading.number,
                reading.time_s,
                reading.unix_s,
                reading.step,
                *map(values.get, self._names),
                *map(taken.get, self._instruments),
            )
        )
        self._last_number = reading.number
        if self._live:
            self.commit_if_due()
        elif len(self._readings) >= _BATCH_ROWS:
            self._commit_or_wait()

    def append_command(
        self,
        *,
        instrument: str,
        operation: str,
        value: float | None,
        sent: str,
        read_back: float | None,
        verdict: Verdict,
        reason: str = "",
    ) -> int:
        """Append what became of a command, at the clock's time; returns its id."""
        if verdict not in VERDICTS:
            raise LedgerError(f"verdict {verdict!r} is not known; there are {', '.join(VERDICTS)}")
        number = self._next_id("command")
        row = (number, self._clock(), instrument, operation, value, sent, read_back)
        self._append(_INSERT_COMMAND, (*row, verdict, reason, self._last_number))
        return number

    def append_event(
        self,
        *,
        kind: str,
        name: str,
        severity: str = "info",
        text: str = "",
        data: Mapping[str, Any] | None = None,
    ) -> int:
        """Append an event at the clock's and the wall's time; returns its id."""
        kept = to_json(data or {}, f"event {kind} {name}")
        number = self._next_id("event")
        row = (number, self._clock(), self._wall(), kind, name, severity, text, kept)
        self._append(_INSERT_EVENT, row)
        return number

    def append_finding(self, *, source: str, data: Mapping[str, Any]) -> int:
        """Append a message of the analyst at the clock's time; returns its id."""
        kept = to_json(data, f"a finding from {source}")
        number = self._next_id("finding")
        self._append(_INSERT_FINDING, (number, self._clock(), source, kept))
        return number

    def checkpoint(self, data: Mapping[str, Any]) -> int:
        """Append what is needed to take the night up again; returns its id."""
        kept = to_json(data, "a checkpoint")
        number = self._next_id("checkpoint")
        self._append(_INSERT_CHECKPOINT, (number, self._clock(), kept))
        return number

    def pending_requests(self) -> list[RequestRecord]:
        """Requests that nobody has taken up, oldest first. Also commits readings that are due."""
        self.commit_if_due()
        try:
            rows = self._connection.execute(
                "SELECT id, unix_s, kind, name, reason, person, taken_s FROM request "
                "WHERE taken_s IS NULL ORDER BY id"
            ).fetchall()
        except sqlite3.Error as error:
            self._failure = f"{self._file}: requests cannot be read: {error}"
            return []
        return [RequestRecord(*row) for row in rows]

    def take_request(self, id: int, time_s: float) -> None:
        """Mark a request as taken up at a time of the night's clock; on disk at once."""
        self._waiting.setdefault(_TAKE_REQUEST, []).append((time_s, id))
        self._commit_or_wait()

    def commit_if_due(self) -> None:
        """In a live night, commit when something has waited; cheap when nothing has."""
        waits = self._readings or self._waiting
        if self._live and waits and self._clock() - self._last_commit_s >= _COMMIT_AFTER_S:
            self._commit_or_wait()

    def commit(self) -> int:
        """Put everything appended so far on disk.

        Returns
        -------
        int
            Number of the last reading on disk.

        Raises
        ------
        LedgerError
            The file could not be written. Nothing is lost: the rows wait for the next commit.
        """
        if self._closed:
            raise LedgerError(f"{self._file} has been closed")
        if not self._readings and not self._waiting:
            return self._committed_number
        connection = self._connection
        try:
            connection.execute("BEGIN IMMEDIATE")
            connection.executemany(self._insert_reading, self._readings)
            for statement, rows in self._waiting.items():
                connection.executemany(statement, rows)
            connection.execute("COMMIT")
        except sqlite3.Error as error:
            if connection.in_transaction:
                connection.execute("ROLLBACK")
            raise LedgerError(
                f"{self._file} could not be written, {len(self._readings)} readings wait: {error}"
            ) from error
        self._readings.clear()
        self._waiting.clear()
        self._committed_number = self._last_number
        self._last_commit_s = self._clock()
        self._waiting_since_s = None
        self._failure = ""
        self._commits += 1
        return self._committed_number

    def close(self) -> None:
        """Commit what waits and close the file; safe to call twice."""
        if self._closed:
            return
        try:
            self.commit()
        finally:
            self._closed = True
            self._connection.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()

    def _next_id(self, table: str) -> int:
        self._ids[table] += 1
        return self._ids[table]

    def _append(self, statement: str, row: tuple[object, ...]) -> None:
        self._waiting.setdefault(statement, []).append(row)
        if self._live:
            self._commit_or_wait()

    def _commit_or_wait(self) -> None:
        """Commit; what cannot be written waits, and after a bounded time counts as a failure."""
        now_s = self._clock()
        try:
            self.commit()
        except LedgerError as error:
            cause = error.__cause__
            busy = isinstance(cause, sqlite3.OperationalError) and (
                getattr(cause, "sqlite_errorcode", 0) & 0xFF == sqlite3.SQLITE_BUSY
            )
            if self._waiting_since_s is None:
                self._waiting_since_s = now_s
            if not busy or now_s - self._waiting_since_s > _PATIENCE_S:
                self._failure = str(error)
            self._last_commit_s = now_s  # try again when next due, not at every reading


def _write_description(
    connection: sqlite3.Connection, night: NightDescription, channels: Sequence[Channel]
) -> None:
    truth = None if night.truth is None else to_json(night.truth, "the world's truth")
    connection.execute("BEGIN IMMEDIATE")
    connection.execute(
        "INSERT INTO night (id, format_version, program_version, night, rig, sequence, mode, "
        "started_unix_s, seed, broker, rig_text, sequence_text, world_text, truth) "
        "VALUES (1, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)",
        (
            FORMAT_VERSION,
            night.program_version,
            night.night,
            night.rig,
            night.sequence,
            night.mode,
            night.started_unix_s,
            night.seed,
            night.broker,
            night.rig_text,
            night.sequence_text,
            night.world_text,
            truth,
        ),
    )
    connection.executemany(
        "INSERT INTO channel VALUES (?, ?, ?, ?)",
        [(i, c.name, c.unit, c.instrument) for i, c in enumerate(channels)],
    )
    connection.execute("COMMIT")
