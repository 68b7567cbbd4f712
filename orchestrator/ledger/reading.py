"""Reading a ledger back, while the night runs or years later."""

import hashlib
import json
import math
import sqlite3
import struct
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from types import TracebackType
from typing import TYPE_CHECKING, Any, Self

from orchestrator.ledger.records import (
    CheckpointRecord,
    CommandRecord,
    EventRecord,
    FindingRecord,
    NightDescription,
    RequestRecord,
)
from orchestrator.ledger.schema import (
    LedgerError,
    connect_to_existing,
    instruments_of,
    ledger_path,
    reading_columns,
    taken_column,
)
from orchestrator.readings import Channel, Reading

if TYPE_CHECKING:
    import xarray

_BUSY_TIMEOUT_S = 5.0
_EVERYTHING = -1  # SQLite: a negative LIMIT is none
_CHUNK = 10_000


class NightReader:
    """A ledger open for reading only. It sees what is committed, and never holds up the writer.

    Parameters
    ----------
    path : str or Path
        The night's folder or its ledger.

    Raises
    ------
    LedgerError
        There is no ledger, or it cannot be read.

    Notes
    -----
    A reader belongs to the thread that made it.
    """

    def __init__(self, path: str | Path) -> None:
        self._file = ledger_path(path)
        self._connection = connect_to_existing(self._file, "ro", _BUSY_TIMEOUT_S)
        try:
            self._description = self._read_description()
            rows = self._rows("SELECT name, unit, instrument FROM channel ORDER BY position")
        except BaseException:
            self._connection.close()
            raise
        self._channels = tuple(Channel(*row) for row in rows)
        self._names = tuple(channel.name for channel in self._channels)
        self._instruments = instruments_of(self._channels)
        self._select = f"SELECT {', '.join(reading_columns(self._channels))} FROM reading"

    @property
    def path(self) -> Path:
        """The ledger's file."""
        return self._file

    def description(self) -> NightDescription:
        """What the night is."""
        return self._description

    def channels(self) -> tuple[Channel, ...]:
        """The rig's channels, in the order of the columns."""
        return self._channels

    def last_number(self) -> int:
        """Number of the last committed reading; 0 before the first."""
        return int(self._rows("SELECT coalesce(max(number), 0) FROM reading")[0][0])

    def last_event_id(self) -> int:
        """Id of the last committed event; 0 before the first."""
        return int(self._rows("SELECT coalesce(max(id), 0) FROM event")[0][0])

    def readings(self, after: int = 0, limit: int = _EVERYTHING) -> list[Reading]:
        """Readings with numbers above ``after``, oldest first, at most ``limit`` of them."""
        rows = self._rows(f"{self._select} WHERE number > ? ORDER BY number LIMIT ?", after, limit)
        return [self._reading(row) for row in rows]

    def commands(self, after_id: int = 0, limit: int = _EVERYTHING) -> list[CommandRecord]:
        """Commands, oldest first."""
        rows = self._rows(
            "SELECT id, time_s, instrument, operation, value, sent, read_back, verdict, reason, "
            "reading_number FROM command WHERE id > ? ORDER BY id LIMIT ?",
            after_id,
            limit,
        )
        return [
            CommandRecord(*_replaced(row, {4: _number(row[4]), 6: _number(row[6])})) for row in rows
        ]

    def events(self, after_id: int = 0, limit: int = _EVERYTHING) -> list[EventRecord]:
        """Events, oldest first."""
        rows = self._rows(
            "SELECT id, time_s, unix_s, kind, name, severity, text, data FROM event "
            "WHERE id > ? ORDER BY id LIMIT ?",
            after_id,
            limit,
        )
        return [EventRecord(*_replaced(row, {7: self._json(row[7])})) for row in rows]

    def findings(self, after_id: int = 0, limit: int = _EVERYTHING) -> list[FindingRecord]:
        """Findings, oldest first."""
        rows = self._rows(
            "SELECT id, time_s, source, data FROM finding WHERE id > ? ORDER BY id LIMIT ?",
            after_id,
            limit,
        )
        return [FindingRecord(*_replaced(row, {3: self._json(row[3])})) for row in rows]

    def last_checkpoint(self) -> CheckpointRecord | None:
        """The newest checkpoint, or None before the first."""
        rows = self._rows("SELECT id, time_s, data FROM checkpoint ORDER BY id DESC LIMIT 1")
        return CheckpointRecord(*_replaced(rows[0], {2: self._json(rows[0][2])})) if rows else None

    def requests(self) -> list[RequestRecord]:
        """Every request, taken up or not, oldest first."""
        rows = self._rows(
            "SELECT id, unix_s, kind, name, reason, person, taken_s FROM request ORDER BY id"
        )
        return [RequestRecord(*row) for row in rows]

    def fingerprint(self) -> str:
        """SHA-256 over the readings, as hex: equal for two nights with the same readings.

        Covered are the channels and, of every reading, number, time, step, values and when they
        were taken, in a fixed binary form (little-endian, NaN for what is missing). Wall time is
        left out, so that a rehearsal repeated from its seed has the same fingerprint.
        """
        digest = hashlib.sha256(b"nightfield readings 1\n")
        for channel in self._channels:
            digest.update(json.dumps([channel.name, channel.unit, channel.instrument]).encode())
        numbers = struct.Struct(f"<{len(self._names) + len(self._instruments)}d")
        for row in self._all_rows():
            step = row[3].encode()
            digest.update(struct.pack("<qdI", row[0], row[1], len(step)) + step)
            digest.update(numbers.pack(*map(_number, row[4:])))
        return digest.hexdigest()

    def close(self) -> None:
        """Close the file; safe to call twice."""
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

    def _rows(self, statement: str, *values: object) -> list[Any]:
        try:
            return self._connection.execute(statement, values).fetchall()
        except sqlite3.Error as error:
            raise LedgerError(f"{self._file} cannot be read as a ledger: {error}") from error

    def _all_rows(self) -> Iterator[Any]:
        """Every reading's row, a chunk at a time, so that no read lasts long."""
        after = 0
        statement = f"{self._select} WHERE number > ? ORDER BY number LIMIT {_CHUNK}"
        while rows := self._rows(statement, after):
            yield from rows
            after = rows[-1][0]

    def _reading(self, row: Sequence[Any]) -> Reading:
        end = 4 + len(self._names)
        values = dict(zip(self._names, map(_number, row[4:end]), strict=True))
        taken = zip(self._instruments, row[end:], strict=True)
        return Reading(
            row[0], row[1], row[2], row[3], values, {i: t for i, t in taken if t is not None}
        )

    def _read_description(self) -> NightDescription:
        rows = self._rows(
            "SELECT night, rig, sequence, mode, started_unix_s, program_version, seed, broker, "
            "rig_text, sequence_text, world_text, truth FROM night"
        )
        if not rows:
            raise LedgerError(f"{self._file} says nothing of its night: its making was cut short")
        (row,) = rows
        return NightDescription(*_replaced(row, {11: row[11] and self._json(row[11])}))

    def _json(self, text: str) -> dict[str, Any]:
        try:
            data = json.loads(text)
        except ValueError as error:
            raise LedgerError(f"{self._file} holds data that is not JSON: {error}") from None
        if not isinstance(data, dict):
            raise LedgerError(f"{self._file} holds data that is not a JSON object: {text[:60]}")
        return data


def _replaced(row: Sequence[Any], others: Mapping[int, Any]) -> list[Any]:
    return [others.get(position, value) for position, value in enumerate(row)]


def _number(value: float | None) -> float:
    return math.nan if value is None else value


def open_night(path: str | Path) -> "xarray.Dataset":
    """The readings of a night as a dataset with units.

    Parameters
    ----------
    path : str or Path
        The night's folder or its ledger.

    Returns
    -------
    xarray.Dataset
        Dimension ``number``; coordinates ``time_s``, ``unix_s`` and ``step`` along it; one
        variable a channel and one ``<instrument>_taken_s`` an instrument, each with a ``units``
        attribute. What the night is stands in the dataset's attributes.

    Raises
    ------
    LedgerError
        There is no ledger, or it cannot be read.
    """
    import numpy as np
    import xarray as xr  # slow to import, and needed here alone

    with NightReader(path) as reader:
        night, channels = reader.description(), reader.channels()
        instruments = instruments_of(channels)
        chunks, steps, numbers = [], [], []
        after = 0
        while rows := reader._rows(
            f"{reader._select} WHERE number > ? ORDER BY number LIMIT {_CHUNK}", after
        ):
            numbers += [row[0] for row in rows]
            steps += [row[3] for row in rows]
            chunks.append(np.array([(*row[1:3], *row[4:]) for row in rows], dtype=np.float64))
            after = rows[-1][0]
    width = 2 + len(channels) + len(instruments)
    table = np.concatenate(chunks) if chunks else np.empty((0, width))
    units = [(c.name, c.unit or "1", c.instrument) for c in channels]
    units += [(taken_column(i), "s", i) for i in instruments]
    variables = {
        name: ("number", table[:, 2 + column], {"units": unit, "instrument": instrument})
        for column, (name, unit, instrument) in enumerate(units)
    }
    coordinates = {
        "number": ("number", np.array(numbers, dtype=np.int64)),
        "time_s": ("number", table[:, 0], {"units": "s", "long_name": "time of the night's clock"}),
        "unix_s": ("number", table[:, 1], {"units": "s", "long_name": "wall time since 1970"}),
        "step": ("number", np.array(steps, dtype=np.str_)),
    }
    attributes: dict[str, object] = {
        "night": night.night,
        "rig": night.rig,
        "sequence": night.sequence,
        "mode": night.mode,
        "started_unix_s": night.started_unix_s,
        "program_version": night.program_version,
    }
    if night.seed is not None:
        attributes["seed"] = night.seed
    return xr.Dataset(variables, coords=coordinates, attrs=attributes)
