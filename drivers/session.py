"""A VISA session that reopens and proves itself before it is used again after any doubt.

Blocking; all calls from one thread, except `distrust`.
"""

import pyvisa

from drivers.errors import BadReply, Closed, LinkError, Timeout, Unreachable, WrongInstrument
from drivers.wire import (
    Wire,
    WireClosed,
    WireRefused,
    WireSettings,
    WireStray,
    WireTimeout,
    open_wire,
)

_PROOFS_MAX = 3


class Session:
    """One instrument's session.

    Parameters
    ----------
    manager, address, name
        Where, and what the instrument is called in errors.
    settings : WireSettings
    write_end : bytes
        What ends a message.
    identity_query : str
        A query whose answer never changes; it proves a new session.
    """

    def __init__(
        self,
        manager: pyvisa.ResourceManager,
        address: str,
        *,
        name: str,
        settings: WireSettings,
        write_end: bytes,
        identity_query: str,
    ) -> None:
        self._manager, self._address, self._name = manager, address, name
        self._settings, self._write_end = settings, write_end
        self._identity_query = identity_query
        self._wire: Wire | None = None
        self._wanted = self._trusted = 0
        self.identity: str | None = None
        self.opened = 0

    def distrust(self) -> None:
        """What comes next may belong to an earlier message: reopen first. From any thread."""
        self._wanted += 1

    def exchange(self, text: str, reply: bool) -> str:
        """Send one message, and take its reply if it has one.

        Raises
        ------
        LinkError
            Its field ``sent`` tells whether the instrument may have the message.
        """
        data = text.encode("ascii") + self._write_end
        wire = self._ready()
        return self._talk(wire, text, data, reply)

    def open(self) -> str:
        """Open and prove the session; the identity."""
        self._ready()
        assert self.identity is not None
        return self.identity

    def close(self) -> None:
        """Close the session."""
        if self._wire is not None:
            self._wire.close()
            self._wire = None

    # -- within -------------------------------------------------------------------------------

    def _ready(self) -> Wire:
        wire = self._wire
        if wire is not None and self._wanted == self._trusted and not wire.stale():
            return wire
        for attempt in range(_PROOFS_MAX):
            wanted = self._wanted
            self.close()
            wire = self._opened()
            if self._proved(wire, last=attempt == _PROOFS_MAX - 1):
                self._trusted = wanted
                return wire
        raise AssertionError("unreachable")

    def _opened(self) -> Wire:
        wanted = self._wanted
        try:
            wire = open_wire(
                self._manager, self._address, self._settings, lambda: self._wanted != wanted
            )
        except WireRefused as error:
            raise Unreachable(self._name, self._address, problem=str(error)) from None
        self._wire = wire
        self.opened += 1
        return wire

    def _proved(self, wire: Wire, last: bool) -> bool:
        """Whether the instrument gives its identity on the new session, and nothing else."""
        query = self._identity_query
        try:
            identity = self._talk(wire, query, query.encode("ascii") + self._write_end, True)
            expected = self.identity
            if expected is not None and identity != expected:
                raise WrongInstrument(
                    self._name, self._address, query, expected=expected, identity=identity
                )
            if not wire.settled():
                raise self._bad(query, identity, "more than one line came")
        except LinkError as error:
            self.close()
            error.sent = False  # of whatever was to be sent, nothing has gone out
            if isinstance(error, BadReply | WrongInstrument) and not last:
                return False
            raise
        self.identity = identity
        return True

    def _talk(self, wire: Wire, text: str, data: bytes, reply: bool) -> str:
        where = (self._name, self._address, text)
        try:
            wire.send(data)
            if not reply:
                return ""
            line = wire.receive()
        except WireTimeout as error:
            self.distrust()
            raise Timeout(*where, problem=str(error), sent=True) from None
        except WireClosed as error:
            self.distrust()
            raise Closed(*where, problem=str(error), sent=True) from None
        except WireStray as error:
            self.distrust()
            raise self._bad(text, _shown(error.args[0]), "more than one line came") from None
        try:
            return line.decode("ascii").strip()
        except UnicodeDecodeError:
            self.distrust()
            raise self._bad(text, _shown(line), "it is not ASCII text") from None

    def _bad(self, text: str, reply: str, problem: str) -> BadReply:
        return BadReply(self._name, self._address, text, reply=reply, problem=problem)


def _shown(data: bytes) -> str:
    return data.decode("ascii", "backslashreplace")
