"""Front panels at VISA addresses, inside pyvisa-sim.

pyvisa-sim's library keeps a table of devices. Here the table holds ports of our panels, and the
read loop is ours: it knows whether an answer will ever come, so a timeout is given at once instead
of after waiting. Sessions, attributes and addresses are pyvisa-sim's own.
"""

import itertools
import threading
from collections.abc import Mapping
from typing import Any, SupportsInt

import pyvisa
from pyvisa import constants, errors, rname
from pyvisa.typing import VISARMSession, VISASession
from pyvisa.util import LibraryPath
from pyvisa_sim.devices import Devices
from pyvisa_sim.highlevel import SimVisaLibrary

from simulators.exchange import MessagePort, StreamPort
from simulators.front_panel import FrontPanel

_ATTRIBUTE = constants.ResourceAttribute
_STATUS = constants.StatusCode
_numbers = itertools.count(1)


class _PanelLibrary(SimVisaLibrary):
    """pyvisa-sim's library with an empty table and a read that never waits."""

    def _init(self) -> None:
        self.sessions = {}
        self.devices = Devices()
        # All panels of a rig share one world, and links may live in threads of their own.
        self._one_at_a_time = threading.RLock()

    def open(
        self,
        session: VISARMSession,
        resource_name: str,
        access_mode: constants.AccessModes = constants.AccessModes.no_lock,
        open_timeout: SupportsInt = constants.VI_TMO_IMMEDIATE,
    ) -> tuple[VISASession, constants.StatusCode]:
        """viOpen: a socket gives each session a byte stream of its own."""
        handle, status = super().open(session, resource_name, access_mode, open_timeout)
        if status != _STATUS.success:
            # A status alone would let pyvisa hand out a resource that leads nowhere.
            raise errors.VisaIOError(status)
        opened: Any = self.sessions[handle]
        if isinstance(opened.device, FrontPanel):
            opened.device = StreamPort(opened.device)
        return handle, status

    def read(self, session: VISASession, count: int) -> tuple[bytes, constants.StatusCode]:
        """viRead: VPP-4.3 rules 6.1.1 to 6.1.6 on END, termination character and count."""
        try:
            opened: Any = self.sessions[session]
        except KeyError:
            return b"", _STATUS.error_invalid_object
        attributes = opened.attrs
        stop = attributes.get(_ATTRIBUTE.termchar, 10)
        stop = stop if attributes.get(_ATTRIBUTE.termchar_enabled, False) else None
        with self._one_at_a_time:
            taken, end = opened.device.take(count, stop)
        if end and not attributes.get(_ATTRIBUTE.suppress_end_enabled, False):
            return taken, _STATUS.success
        if stop is not None and taken and taken[-1] == stop:
            return taken, _STATUS.success_termination_character_read
        if len(taken) == count:
            return taken, _STATUS.success_max_count_read
        raise errors.VisaIOError(_STATUS.error_timeout)

    def write(self, session: VISASession, data: bytes) -> tuple[int, constants.StatusCode]:
        """viWrite."""
        with self._one_at_a_time:
            return super().write(session, data)

    def read_stb(self, session: VISASession) -> tuple[int, constants.StatusCode]:
        """viReadSTB: a serial poll, where the interface has one; a raw socket has none."""
        opened: Any = self.sessions[session]
        if not isinstance(opened.device, MessagePort):
            raise errors.VisaIOError(_STATUS.error_nonsupported_operation)
        with self._one_at_a_time:
            port = opened.device
            return port.panel.status.serial_poll(port.message_available), _STATUS.success

    def clear(self, session: VISASession) -> constants.StatusCode:
        """viClear: the port forgets what is unread and half written."""
        opened: Any = self.sessions[session]
        with self._one_at_a_time:
            opened.device.clear()
        return _STATUS.success


def normal_address(address: str) -> str:
    """An address in the full form in which VISA keeps it.

    Raises
    ------
    ValueError
        If it is no VISA address.
    """
    try:
        return str(rname.to_canonical_name(address))
    except rname.InvalidResourceName as error:
        raise ValueError(f"{address!r} is not a VISA address: {error}") from None


def attach(panels: Mapping[str, FrontPanel]) -> pyvisa.ResourceManager:
    """Make a resource manager at whose addresses the panels answer.

    Parameters
    ----------
    panels : mapping of str to FrontPanel
        VISA address to panel: ``TCPIP0::magnet.sim::5025::SOCKET`` is a byte stream;
        ``GPIB0::1::INSTR``, ``TCPIP0::host::inst0::INSTR`` and ``USB...::INSTR`` carry END and keep
        the message exchange of IEEE 488.2.

    Returns
    -------
    pyvisa.ResourceManager
        Independent of every other one.

    Raises
    ------
    ValueError
        An address is malformed, or two are the same.
    """
    # pyvisa keeps one library per path, so each gets a path of its own.
    library = _PanelLibrary(LibraryPath(f"nightfield-{next(_numbers)}"))
    table: dict[str, Any] = library.devices._internal
    for address, panel in panels.items():
        full = normal_address(address)
        if full in table:
            raise ValueError(f"two panels at the address {full}")
        table[full] = panel if full.endswith("::SOCKET") else MessagePort(panel)
    return pyvisa.ResourceManager(library)
