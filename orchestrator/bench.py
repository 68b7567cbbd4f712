"""The bench: the opened instruments of a rig as typed capabilities, and the channels they fill."""

import asyncio
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pyvisa

from drivers.capabilities import Gauge, LockIn, MagnetSupply, TemperatureController
from drivers.dialect import Dialect, load_dialect, shipped_dialects
from drivers.kinds import Kind
from drivers.opening import (
    open_gauge,
    open_lock_in,
    open_magnet_supply,
    open_temperature_controller,
)
from orchestrator.config.document import Document
from orchestrator.config.rig import Rig, Spoken
from orchestrator.readings import Channel

MAGNET_UNITS = {
    "field_t": "T",
    "current_a": "A",
    "magnet_v": "V",
    "ramping": "",
    "quench": "",
    "switch_heater": "",
    "persistent_field_t": "T",
}


def channels_of(rig: Rig) -> tuple[Channel, ...]:
    """The columns of a rig's readings, in their order."""
    channels = [Channel(name, unit, "magnet") for name, unit in MAGNET_UNITS.items()]
    channels += [
        Channel("sample_k", "K", "stage"),
        Channel("setpoint_k", "K", "stage"),
        Channel("heater_w", "W", "stage"),
    ]
    for lock_in in rig.lock_ins:
        name = lock_in.name
        channels += [
            Channel(f"{name}_x_v", "V", name),
            Channel(f"{name}_y_v", "V", name),
            Channel(f"{name}_overload", "", name),
        ]
    channels += [Channel(f"{one.name}_percent", "percent", one.name) for one in rig.gauges]
    return tuple(channels)


@dataclass(frozen=True)
class Bench:
    """The opened instruments. Only the sampler reads them, and only the gate writes to them."""

    magnet: MagnetSupply
    stage: TemperatureController
    lock_ins: dict[str, LockIn]
    gauges: dict[str, Gauge]

    @property
    def instruments(self) -> tuple[str, ...]:
        """Names of all instruments, in the order of the channels."""
        return ("magnet", "stage", *self.lock_ins, *self.gauges)

    async def read(self, instrument: str) -> dict[str, float]:
        """The present values of one instrument, by channel name. Raises what its link raises."""
        if instrument == "magnet":
            magnet = await self.magnet.read()
            return {
                "field_t": magnet.field_t,
                "current_a": magnet.current_a,
                "magnet_v": magnet.voltage_v,
                "ramping": float(magnet.ramping),
                "quench": float(magnet.quench),
                "switch_heater": float(magnet.switch_heater),
                "persistent_field_t": magnet.persistent_field_t,
            }
        if instrument == "stage":
            stage = await self.stage.read()
            return {
                "sample_k": stage.temperature_k,
                "setpoint_k": stage.setpoint_k,
                "heater_w": stage.heater_w,
            }
        if instrument in self.lock_ins:
            lock_in = await self.lock_ins[instrument].read()
            return {
                f"{instrument}_x_v": lock_in.x_v,
                f"{instrument}_y_v": lock_in.y_v,
                f"{instrument}_overload": float(lock_in.overload),
            }
        return {f"{instrument}_percent": await self.gauges[instrument].read()}

    async def identities(self) -> dict[str, str]:
        """Each instrument's reply to the question who it is."""
        names = self.instruments
        drivers = (self.magnet, self.stage, *self.lock_ins.values(), *self.gauges.values())
        replies = await asyncio.gather(*(driver.identity() for driver in drivers))
        return dict(zip(names, replies, strict=True))

    async def close(self) -> None:
        """Close every link."""
        drivers = (self.magnet, self.stage, *self.lock_ins.values(), *self.gauges.values())
        await asyncio.gather(*(driver.close() for driver in drivers), return_exceptions=True)


def load_dialects(rig: Rig, document: Document) -> dict[str, Dialect]:
    """The dialect of every instrument, by the instrument's name.

    A dialect is one that is shipped, by its name, or a file of the laboratory's own: a path that
    ends in ``.toml``, from the rig file's folder.

    Raises
    ------
    ConfigError
        The rig file names a dialect that does not exist, or is of another kind of instrument.
    DialectError
        A dialect file is wrong.
    """
    wanted: list[tuple[str, Kind, tuple[str | int, ...], Spoken]] = [
        ("magnet", "magnet", ("magnet",), rig.magnet),
        ("stage", "temperature", ("stage",), rig.stage),
    ]
    for index, lock_in in enumerate(rig.lock_ins):
        wanted.append((lock_in.name, "lockin", ("lockin", index), lock_in))
    for index, gauge in enumerate(rig.gauges):
        wanted.append((gauge.name, "gauge", ("gauge", index), gauge))
    dialects: dict[str, Dialect] = {}
    for name, kind, place, spoken in wanted:
        own = Path(document.path).parent / spoken.dialect
        is_own = spoken.dialect.endswith(".toml")
        problem = ""
        if not is_own and spoken.dialect not in shipped_dialects():
            problem = "is not a shipped dialect"
        elif is_own and not own.is_file():
            problem = f"there is no file {own}"
        else:
            dialects[name] = load_dialect(own if is_own else spoken.dialect)
            if dialects[name].kind != kind:
                problem = f"is the dialect of a {dialects[name].kind}"
        if problem:
            raise document.refuse(
                (*place, "dialect"),
                problem,
                value=f'"{spoken.dialect}"',
                allowed=f"a {kind} dialect: {', '.join(_shipped_of(kind))}, or a .toml file",
            )
    return dialects


def _shipped_of(kind: Kind) -> list[str]:
    return [name for name in shipped_dialects() if load_dialect(name).kind == kind]


async def open_bench(
    rig: Rig, document: Document, manager: pyvisa.ResourceManager, *, inline: bool
) -> Bench:
    """Open every instrument of a rig and prove who is there.

    Parameters
    ----------
    rig, document : Rig, Document
        Addresses and dialects, and where they stand.
    manager : pyvisa.ResourceManager
        Of a VISA library, or of the simulated rig.
    inline : bool
        Exchanges run in the event loop itself, for a clock that jumps; otherwise in a thread of
        each link's own.

    Raises
    ------
    LinkError
        An instrument does not answer, or is another one; nothing stays open.
    ConfigError, DialectError
        See `load_dialects`.
    """
    dialects = load_dialects(rig, document)
    opened: list[Any] = []

    def link(name: str, spoken: Spoken) -> dict[str, Any]:
        return {
            "manager": manager,
            "address": spoken.address,
            "dialect": dialects[name],
            "name": name,
            "inline": inline,
        }

    try:
        magnet = await open_magnet_supply(
            **link("magnet", rig.magnet), coil_constant_t_per_a=rig.magnet.coil_constant_t_per_a
        )
        opened.append(magnet)
        stage = await open_temperature_controller(**link("stage", rig.stage))
        opened.append(stage)
        lock_ins: dict[str, LockIn] = {}
        for one in rig.lock_ins:
            lock_ins[one.name] = await open_lock_in(**link(one.name, one))
            opened.append(lock_ins[one.name])
        gauges: dict[str, Gauge] = {}
        for gauge in rig.gauges:
            gauges[gauge.name] = await open_gauge(**link(gauge.name, gauge))
            opened.append(gauges[gauge.name])
    except BaseException:
        await asyncio.gather(*(driver.close() for driver in opened), return_exceptions=True)
        raise
    return Bench(magnet, stage, lock_ins, gauges)
