"""One open VISA session as a wire for lines: bytes out, one line in, and no surprises.

A session belongs to one thread. Reading and writing go through VISA's own viRead and viWrite. On
the sockets of pyvisa-py, whose viRead spins at full load once the peer has closed and loses what
came before a timeout, the wire first waits for the socket itself and then asks VISA only for bytes
that are there.
"""

import contextlib
import os
import select
import socket
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

import pyvisa
from pyvisa import constants
from pyvisa.errors import VisaIOError

REPLY_MAX = 1 << 20
"""Longest reply, bytes."""

_SLICE_S = 0.05
_CHUNK = 20 * 1024
_STATUS = constants.StatusCode
_TIMEOUT = constants.ResourceAttribute.timeout_value
_LOST = {
    _STATUS.error_connection_lost,
    _STATUS.error_invalid_object,
    _STATUS.error_io,
    _STATUS.error_resource_locked,
}


class WireTimeout(Exception):
    """No complete line in time."""


class WireClosed(Exception):
    """The peer closed, or the session broke."""


class WireRefused(Exception):
    """The session could not be opened."""


class WireStray(Exception):
    """More than one line came for one question. The argument is what came."""


@dataclass(frozen=True, slots=True)
class WireSettings:
    """How a wire behaves.

    Attributes
    ----------
    timeout_s : float
        For opening, and for one line.
    read_end : bytes
        What ends a reply.
    serial : dict
        PyVISA attributes of a serial port, such as ``baud_rate``; not used elsewhere.
    """

    timeout_s: float
    read_end: bytes
    serial: dict[str, Any]


class Wire(Protocol):
    """An open session."""

    def stale(self) -> bool:
        """Whether bytes are there that nobody asked for, or the peer has gone."""
        ...

    def send(self, data: bytes) -> None: ...

    def receive(self) -> bytes:
        """One line without its end."""
        ...

    def settled(self) -> bool:
        """Whether nothing more comes for a short while; used after opening only."""
        ...

    def close(self) -> None: ...


class SocketWire:
    """A TCP socket session of pyvisa-py."""

    def __init__(
        self,
        resource: Any,
        sock: socket.socket,
        settings: WireSettings,
        given_up: Callable[[], bool],
    ) -> None:
        self._resource, self._sock = resource, sock
        self._library, self._session = resource.visalib, resource.session
        self._timeout_s, self._end = settings.timeout_s, settings.read_end
        self._given_up = given_up
        # A read that fills its count is the rule here, not worth a warning.
        self._quiet = resource.ignore_warning(_STATUS.success_max_count_read)
        self._quiet.__enter__()

    def stale(self) -> bool:
        """Anything readable before a question is either the peer's end or a stray reply."""
        return bool(select.select([self._sock], [], [], 0)[0])

    def send(self, data: bytes) -> None:
        """Hand all bytes to the system. Raises WireClosed."""
        try:
            self._library.write(self._session, data)
        except (OSError, VisaIOError) as error:
            raise WireClosed(f"the connection broke ({error})") from None

    def receive(self) -> bytes:
        """One line. Raises WireTimeout, WireClosed, WireStray."""
        end, sock = self._end, self._sock
        got = b""
        deadline_s = time.monotonic() + self._timeout_s
        while True:
            left_s = deadline_s - time.monotonic()
            if left_s <= 0 or self._given_up():
                heard = f" (it began with {got[:80]!r})" if got else ""
                raise WireTimeout(f"no reply within {self._timeout_s:g} s{heard}")
            if not select.select([sock], [], [], min(left_s, _SLICE_S))[0]:
                continue
            got += self._take()
            if got.endswith(end):
                break
            if end in got:
                raise WireStray(got)
            if len(got) > REPLY_MAX:
                raise WireStray(got[:200])
        line = got[: -len(end)]
        if end in line:
            raise WireStray(got)
        return line

    def _take(self) -> bytes:
        """The bytes that are there, read through VISA, which then has no reason to wait."""
        try:
            there = len(self._sock.recv(_CHUNK, socket.MSG_PEEK))
            if not there:
                raise WireClosed("the instrument closed the connection")
            data, _ = self._library.read(self._session, there)
        except (OSError, VisaIOError) as error:
            raise WireClosed(f"the connection broke ({error})") from None
        return bytes(data)

    def settled(self) -> bool:
        """Nothing more for 10 ms."""
        return not select.select([self._sock], [], [], 0.01)[0]

    def close(self) -> None:
        """Close the session; never raises."""
        with contextlib.suppress(Exception):
            self._quiet.__exit__(None, None, None)
            self._resource.close()


class VisaWire:
    """Any other session: pyvisa-sim, GPIB, USB, serial, or a vendor's VISA library."""

    def __init__(self, resource: Any, settings: WireSettings) -> None:
        self._resource, self._settings = resource, settings
        self._library, self._session = resource.visalib, resource.session
        self._quiet = resource.ignore_warning(_STATUS.success_max_count_read)
        self._quiet.__enter__()
        self._end = settings.read_end
        self._timeout_ms = resource.timeout
        kind = resource.resource_class
        self._stream = kind == "SOCKET" or resource.interface_type == constants.InterfaceType.asrl

    def stale(self) -> bool:
        """On a byte stream, whether a read that does not wait finds anything."""
        return self._stream and self._finds(constants.VI_TMO_IMMEDIATE)

    def send(self, data: bytes) -> None:
        """Write all bytes. Raises WireTimeout, WireClosed."""
        try:
            _, status = self._library.write(self._session, data)
        except (OSError, VisaIOError) as error:
            raise self._translated(error) from None
        if status < 0:
            raise WireClosed(f"write failed ({status!r})")

    def receive(self) -> bytes:
        """One line. Raises WireTimeout, WireClosed, WireStray."""
        read, session = self._library.read, self._session
        got = b""
        try:
            status = _STATUS.success_max_count_read
            while status == _STATUS.success_max_count_read:
                chunk, status = read(session, _CHUNK)
                got += chunk
                if len(got) > REPLY_MAX:
                    raise WireStray(got[:200])
        except (OSError, VisaIOError) as error:
            raise self._translated(error) from None
        if status < 0:
            raise WireTimeout(f"read failed ({status!r})")
        line = got.removesuffix(self._end)
        if self._end in line:
            raise WireStray(got)
        return line

    def _translated(self, error: OSError | VisaIOError) -> Exception:
        code = getattr(error, "error_code", None)
        if code == _STATUS.error_timeout:
            return WireTimeout(f"no reply within {self._settings.timeout_s:g} s")
        return WireClosed(f"the session broke ({error})")

    def settled(self) -> bool:
        """On a byte stream, nothing more for 20 ms; else the interface keeps messages apart."""
        return not self._stream or not self._finds(20)

    def _finds(self, wait_ms: int) -> bool:
        """Whether a read within the time gives anything but a timeout."""
        library, session = self._library, self._session
        library.set_attribute(session, _TIMEOUT, wait_ms)
        try:
            _, status = library.read(session, 1)
        except (OSError, VisaIOError) as error:
            return getattr(error, "error_code", None) != _STATUS.error_timeout
        finally:
            library.set_attribute(session, _TIMEOUT, self._timeout_ms)
        return bool(status != _STATUS.error_timeout)

    def close(self) -> None:
        """Close the session; never raises."""
        with contextlib.suppress(Exception):
            self._quiet.__exit__(None, None, None)
            self._resource.close()


def open_wire(
    manager: pyvisa.ResourceManager,
    address: str,
    settings: WireSettings,
    given_up: Callable[[], bool],
) -> Wire:
    """Open a session.

    Parameters
    ----------
    manager : pyvisa.ResourceManager
    address : str
        VISA address.
    settings : WireSettings
    given_up : callable
        Whether whoever asked has stopped waiting; looked at about every 50 ms where possible.

    Raises
    ------
    WireRefused
        Nothing is there.
    """
    timeout_ms = max(1, round(settings.timeout_s * 1000))
    try:
        resource: Any = manager.open_resource(address, open_timeout=timeout_ms)
    except Exception as error:  # pyvisa-py raises bare Exception where it cannot connect
        within = f"no connection within {settings.timeout_s:g} s"
        reason = str(error).replace(str(int(_STATUS.error_timeout)), within)
        raise WireRefused(f"could not be opened ({reason})") from None
    try:
        return _prepared(resource, settings, timeout_ms, given_up)
    except WireRefused:
        resource.close()
        raise
    except Exception as error:
        resource.close()
        raise WireRefused(f"could not be set up ({error})") from None


def _prepared(
    resource: Any, settings: WireSettings, timeout_ms: int, given_up: Callable[[], bool]
) -> Wire:
    resource.timeout = timeout_ms
    if resource.interface_type == constants.InterfaceType.asrl:
        for attribute, value in settings.serial.items():
            setattr(resource, attribute, value)
    sock = _socket_of(resource)
    if sock is None:
        resource.read_termination = settings.read_end.decode("ascii")
        with contextlib.suppress(Exception):
            resource.clear()  # forget what an earlier talk left; not every library can
        return VisaWire(resource, settings)
    # pyvisa-py takes a refused connection for an open one; the socket itself knows.
    if problem := sock.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR):
        raise WireRefused(f"connection failed: {os.strerror(problem)}")
    sock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    return SocketWire(resource, sock, settings, given_up)


def _socket_of(resource: Any) -> socket.socket | None:
    """The socket of a pyvisa-py SOCKET session; None for every other kind of session."""
    sessions = getattr(resource.visalib, "sessions", None)
    if resource.resource_class != "SOCKET" or not isinstance(sessions, dict):
        return None
    sock = getattr(sessions.get(resource.session), "interface", None)
    return sock if isinstance(sock, socket.socket) else None
