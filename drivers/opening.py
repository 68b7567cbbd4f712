"""Opening instruments: a link, the proof of who is there, and the driver on top."""

import re
from typing import TypeVar

import pyvisa

from drivers.dialect import Dialect
from drivers.dialect_file import serial_attributes
from drivers.errors import WrongInstrument
from drivers.gauge import ScpiGauge
from drivers.kinds import Kind
from drivers.link import Link, open_link
from drivers.lockin import ScpiLockIn
from drivers.magnet_supply import ScpiMagnetSupply
from drivers.speaking import Speaker
from drivers.temperature_controller import ScpiTemperatureController

S = TypeVar("S", bound=Speaker)


def visa_manager(library: str = "@py") -> pyvisa.ResourceManager:
    """A VISA resource manager.

    Parameters
    ----------
    library : str
        ``"@py"`` for pyvisa-py, ``"@ivi"`` or a path for a vendor's library.

    Notes
    -----
    PyVISA keeps one library per name: closing one manager closes the sessions of the others.
    """
    return pyvisa.ResourceManager(library)


async def open_magnet_supply(
    manager: pyvisa.ResourceManager,
    address: str,
    dialect: Dialect,
    *,
    name: str,
    inline: bool,
    expected_identity: str | None = None,
    coil_constant_t_per_a: float | None = None,
    timeout_s: float = 2.0,
) -> ScpiMagnetSupply:
    """Open a magnet supply.

    Parameters
    ----------
    manager : pyvisa.ResourceManager
    address : str
        VISA address.
    dialect : Dialect
        Of kind ``"magnet"``.
    name : str
        The instrument's name in the rig, for errors.
    inline : bool
        See `drivers.link.open_link`.
    expected_identity : str, optional
        Must be part of the instrument's identity, such as its serial number; any case.
    coil_constant_t_per_a : float, optional
        T/A; needed if the dialect gives field in amperes.
    timeout_s : float
        For one reply.

    Raises
    ------
    LinkError
        Nothing answers, or the wrong instrument does; nothing stays open.
    DialectError
        The dialect needs a coil constant.
    ValueError
        The dialect is of another kind.
    """
    _check_kind(dialect, "magnet", name)
    link = await _open(manager, address, dialect, name, inline, expected_identity, timeout_s)
    try:
        return ScpiMagnetSupply(link, dialect, coil_constant_t_per_a)
    except BaseException:
        await link.close()
        raise


async def open_temperature_controller(
    manager: pyvisa.ResourceManager,
    address: str,
    dialect: Dialect,
    *,
    name: str,
    inline: bool,
    expected_identity: str | None = None,
    timeout_s: float = 2.0,
) -> ScpiTemperatureController:
    """Open a temperature controller. Parameters and errors as in `open_magnet_supply`."""
    _check_kind(dialect, "temperature", name)
    return ScpiTemperatureController(
        await _open(manager, address, dialect, name, inline, expected_identity, timeout_s), dialect
    )


async def open_lock_in(
    manager: pyvisa.ResourceManager,
    address: str,
    dialect: Dialect,
    *,
    name: str,
    inline: bool,
    expected_identity: str | None = None,
    timeout_s: float = 2.0,
) -> ScpiLockIn:
    """Open a lock-in amplifier. Parameters and errors as in `open_magnet_supply`."""
    _check_kind(dialect, "lockin", name)
    return ScpiLockIn(
        await _open(manager, address, dialect, name, inline, expected_identity, timeout_s), dialect
    )


async def open_gauge(
    manager: pyvisa.ResourceManager,
    address: str,
    dialect: Dialect,
    *,
    name: str,
    inline: bool,
    expected_identity: str | None = None,
    timeout_s: float = 2.0,
) -> ScpiGauge:
    """Open a gauge. Parameters and errors as in `open_magnet_supply`."""
    _check_kind(dialect, "gauge", name)
    return ScpiGauge(
        await _open(manager, address, dialect, name, inline, expected_identity, timeout_s), dialect
    )


def _check_kind(dialect: Dialect, kind: Kind, name: str) -> None:
    if dialect.kind != kind:
        raise ValueError(
            f"{name}: the dialect {dialect.name} is of a {dialect.kind}, and a {kind} is needed"
        )


async def _open(
    manager: pyvisa.ResourceManager,
    address: str,
    dialect: Dialect,
    name: str,
    inline: bool,
    expected_identity: str | None,
    timeout_s: float,
) -> Link:
    content = dialect.content
    link = await open_link(
        manager,
        address,
        name=name,
        timeout_s=timeout_s,
        inline=inline,
        identity_query=content.identity.query,
        write_end=content.dialect.write_end,
        read_end=content.dialect.read_end,
        gap_s=content.dialect.pause_s,
        serial=serial_attributes(content.serial),
    )
    identity, pattern = link.identity, content.identity.pattern
    expected = None
    if expected_identity is not None and expected_identity.lower() not in identity.lower():
        expected = expected_identity
    elif not re.fullmatch(pattern, identity):
        expected = pattern
    if expected is not None:
        await link.close()
        raise WrongInstrument(
            name, address, content.identity.query, expected=expected, identity=identity
        )
    return link
