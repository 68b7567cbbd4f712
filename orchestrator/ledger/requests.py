"""A person's request, written into the ledger of a running night by another process."""

import sqlite3
from pathlib import Path

from orchestrator.ledger.records import REQUEST_KINDS, RequestKind
from orchestrator.ledger.schema import LedgerError, connect_to_existing, ledger_path

_BUSY_TIMEOUT_S = 10.0  # a person can wait; the night's own writer does not wait that long


def write_request(
    path: str | Path, kind: RequestKind, *, name: str, reason: str, person: str, unix_s: float
) -> int:
    """Put a request where the engine takes it up; on disk when this returns.

    Parameters
    ----------
    path : str or Path
        The night's folder or its ledger.
    kind : {"hold", "park", "acknowledge"}
        What is wanted.
    name : str
        Name of the trip, for ``acknowledge``; may be empty otherwise.
    reason, person : str
        Why, and who says so. An acknowledgement needs name, reason and person.
    unix_s : float
        Wall time, seconds since 1970.

    Returns
    -------
    int
        The request's number, by which its being taken up can be seen.

    Raises
    ------
    LedgerError
        No ledger there, an unknown kind, or an acknowledgement without name, reason or person.
    """
    if kind not in REQUEST_KINDS:
        raise LedgerError(f"request {kind!r} is not known; there are {', '.join(REQUEST_KINDS)}")
    if kind == "acknowledge":
        for label, text in (("name", name), ("reason", reason), ("person", person)):
            if not text.strip():
                raise LedgerError(f"an acknowledgement needs the {label}; it was empty")
    file = ledger_path(path)
    connection = connect_to_existing(file, "rw", _BUSY_TIMEOUT_S)
    try:
        cursor = connection.execute(
            "INSERT INTO request (unix_s, kind, name, reason, person) VALUES (?, ?, ?, ?, ?)",
            (unix_s, kind, name, reason, person),
        )
        if cursor.lastrowid is None:
            raise LedgerError(f"{file} did not give the request a number")
        return cursor.lastrowid
    except sqlite3.Error as error:
        raise LedgerError(f"the request could not be written to {file}: {error}") from error
    finally:
        connection.close()
