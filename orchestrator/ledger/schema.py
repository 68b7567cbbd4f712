"""The tables of ``night.sqlite``, and how the file is opened.

One file a night, in SQLite's write-ahead mode with ``synchronous=FULL``: a commit that returned is
on disk (https://www.sqlite.org/pragma.html#pragma_synchronous). Tables are STRICT, so a text can
not slip into a number's column. Units stand last in column names.
"""

import json
import math
import re
import sqlite3
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from orchestrator.readings import Channel

FORMAT_VERSION = 1
APPLICATION_ID = 0x4E464C44  # "NFLD", so that another SQLite file is not taken for a ledger
FILE_NAME = "night.sqlite"

_OLDEST_SQLITE = (3, 37, 0)  # STRICT tables, https://www.sqlite.org/stricttables.html
_MOST_COLUMNS = 1000  # SQLite's own default limit is 2000
_IDENTIFIER = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,62}")
_FIXED_COLUMNS = ("number", "time_s", "unix_s", "step")
_ROWID_NAMES = ("rowid", "oid", "_rowid_")


class LedgerError(Exception):
    """The ledger cannot do what was asked; the message names the file and the reason."""


_TABLES = """
CREATE TABLE night (
    id INTEGER PRIMARY KEY CHECK (id = 1),
    format_version INTEGER NOT NULL,
    program_version TEXT NOT NULL,
    night TEXT NOT NULL,
    rig TEXT NOT NULL,
    sequence TEXT NOT NULL,
    mode TEXT NOT NULL CHECK (mode IN ('rehearsal', 'live')),
    started_unix_s REAL NOT NULL,
    seed INTEGER,
    broker TEXT,
    rig_text TEXT NOT NULL,
    sequence_text TEXT NOT NULL,
    world_text TEXT NOT NULL,
    truth TEXT
) STRICT;
CREATE TABLE channel (
    position INTEGER PRIMARY KEY,
    name TEXT NOT NULL UNIQUE COLLATE NOCASE,
    unit TEXT NOT NULL,
    instrument TEXT NOT NULL
) STRICT;
CREATE TABLE command (
    id INTEGER PRIMARY KEY,
    time_s REAL NOT NULL,
    instrument TEXT NOT NULL,
    operation TEXT NOT NULL,
    value REAL,
    sent TEXT NOT NULL,
    read_back REAL,
    verdict TEXT NOT NULL CHECK (verdict IN ('accepted', 'refused', 'mismatch', 'failed')),
    reason TEXT NOT NULL,
    reading_number INTEGER NOT NULL
) STRICT;
CREATE TABLE event (
    id INTEGER PRIMARY KEY,
    time_s REAL NOT NULL,
    unix_s REAL NOT NULL,
    kind TEXT NOT NULL,
    name TEXT NOT NULL,
    severity TEXT NOT NULL,
    text TEXT NOT NULL,
    data TEXT NOT NULL
) STRICT;
CREATE TABLE finding (
    id INTEGER PRIMARY KEY,
    time_s REAL NOT NULL,
    source TEXT NOT NULL,
    data TEXT NOT NULL
) STRICT;
CREATE TABLE checkpoint (
    id INTEGER PRIMARY KEY,
    time_s REAL NOT NULL,
    data TEXT NOT NULL
) STRICT;
CREATE TABLE request (
    id INTEGER PRIMARY KEY AUTOINCREMENT,
    unix_s REAL NOT NULL,
    kind TEXT NOT NULL CHECK (kind IN ('hold', 'park', 'acknowledge')),
    name TEXT NOT NULL,
    reason TEXT NOT NULL,
    person TEXT NOT NULL,
    taken_s REAL
) STRICT;
CREATE INDEX request_not_taken ON request (id) WHERE taken_s IS NULL;
"""


def ledger_path(path: str | Path) -> Path:
    """The ledger's file, given the file itself or the folder of its night."""
    given = Path(path)
    return given / FILE_NAME if given.is_dir() else given


def instruments_of(channels: Sequence[Channel]) -> tuple[str, ...]:
    """Names of the instruments behind the channels, each once, in order of first appearance."""
    return tuple(dict.fromkeys(channel.instrument for channel in channels))


def taken_column(instrument: str) -> str:
    """Column that keeps when an instrument's answer came."""
    return f"{instrument}_taken_s"


def check_channels(channels: Sequence[Channel]) -> None:
    """Refuse channels that cannot be columns.

    Raises
    ------
    LedgerError
        No channels, too many, a name that is not a plain identifier, or two names that differ at
        most in case (SQLite's column names ignore case).
    """
    if not channels:
        raise LedgerError("a ledger needs at least one channel; none was given")
    instruments = instruments_of(channels)
    columns = [channel.name for channel in channels] + [taken_column(i) for i in instruments]
    named = [("channel", channel.name) for channel in channels]
    for kind, name in named + [("instrument", instrument) for instrument in instruments]:
        if _IDENTIFIER.fullmatch(name) is None:
            raise LedgerError(
                f"{kind} name {name!r} cannot be a column of the ledger: use a letter, then "
                "letters, digits and underscores, at most 63 in all"
            )
    seen = dict.fromkeys((*_FIXED_COLUMNS, *_ROWID_NAMES), "the ledger's own column")
    for name in columns:
        if name.lower() in seen:
            raise LedgerError(
                f"channel column {name!r} clashes with {seen[name.lower()]}: "
                "upper and lower case count as the same"
            )
        seen[name.lower()] = f"column {name!r}"
    if len(columns) > _MOST_COLUMNS:
        raise LedgerError(
            f"{len(columns)} columns for readings; a ledger takes at most {_MOST_COLUMNS}"
        )


def reading_columns(channels: Sequence[Channel]) -> list[str]:
    """All columns of the table ``reading``, quoted, in order."""
    names = [*_FIXED_COLUMNS, *(channel.name for channel in channels)]
    names += [taken_column(instrument) for instrument in instruments_of(channels)]
    return [f'"{name}"' for name in names]


def create_tables(connection: sqlite3.Connection, channels: Sequence[Channel]) -> None:
    """Make every table; the channels have been checked."""
    connection.executescript(_TABLES)
    wide = ", ".join(f"{column} REAL" for column in reading_columns(channels)[4:])
    connection.execute(
        'CREATE TABLE reading ("number" INTEGER PRIMARY KEY, "time_s" REAL NOT NULL, '
        f'"unix_s" REAL NOT NULL, "step" TEXT NOT NULL, {wide}) STRICT'
    )
    connection.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    connection.execute(f"PRAGMA user_version = {FORMAT_VERSION}")


def connect_to_write(file: Path, busy_timeout_s: float) -> sqlite3.Connection:
    """Open for writing; transactions are begun and ended by the caller alone."""
    if sqlite3.sqlite_version_info < _OLDEST_SQLITE:
        raise LedgerError(
            f"the ledger needs SQLite 3.37 or later; this Python has {sqlite3.sqlite_version}"
        )
    connection = sqlite3.connect(file, timeout=busy_timeout_s, isolation_level=None)
    connection.execute("PRAGMA journal_mode = WAL")
    connection.execute("PRAGMA synchronous = FULL")
    return connection


def connect_to_existing(file: Path, mode: str, busy_timeout_s: float) -> sqlite3.Connection:
    """Open a ledger that exists already, and make sure that it is one.

    Parameters
    ----------
    file : Path
        The SQLite file.
    mode : {"ro", "rw"}
        Read only, or read and write; the file is never made.
    busy_timeout_s : float
        How long to wait for another process's write, in seconds.

    Raises
    ------
    LedgerError
        No such file, not a SQLite file, not a ledger, or one of another format version.
    """
    if not file.is_file():
        raise LedgerError(f"there is no ledger at {file}")
    try:
        connection = sqlite3.connect(
            f"{file.resolve().as_uri()}?mode={mode}",
            uri=True,
            timeout=busy_timeout_s,
            isolation_level=None,
        )
        try:
            application = connection.execute("PRAGMA application_id").fetchone()[0]
            version = connection.execute("PRAGMA user_version").fetchone()[0]
            if mode == "rw":
                connection.execute("PRAGMA synchronous = FULL")
        except BaseException:
            connection.close()
            raise
    except sqlite3.Error as error:
        raise LedgerError(f"{file} cannot be read as a ledger: {error}") from error
    if application != APPLICATION_ID:
        connection.close()
        raise LedgerError(f"{file} is a SQLite file, but not the ledger of a night")
    if version != FORMAT_VERSION:
        connection.close()
        raise LedgerError(
            f"{file} has ledger format {version}; this program reads format {FORMAT_VERSION}"
        )
    return connection


def to_json(data: Mapping[str, Any], what: str) -> str:
    """JSON text with sorted keys; numbers that are not finite become null.

    Raises
    ------
    LedgerError
        Something in the data has no JSON form; ``what`` names the row it was for.
    """
    try:
        return json.dumps(plain_json(data), sort_keys=True, allow_nan=False, separators=(",", ":"))
    except (TypeError, ValueError) as error:
        raise LedgerError(f"the data of {what} cannot be kept as JSON: {error}") from None


def plain_json(value: Any) -> Any:
    """What JSON can hold of a value: mappings, lists, text, numbers; not finite becomes None."""
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): plain_json(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple | set | frozenset):
        entries = [plain_json(entry) for entry in value]
        return sorted(entries) if isinstance(value, set | frozenset) else entries
    if hasattr(value, "tolist"):  # numpy's scalars and arrays
        return plain_json(value.tolist())
    return value
