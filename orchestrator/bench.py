"""The bench: the opened instruments of a rig as typed capabilities, and the channels they fill."""

import asyncio
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pyvisa

from drivers.capabilities import Gauge, LockIn, MagnetSupply, TemperatureController
from drivers.dialect import load_dialect
from drivers.opening import (
    open_gauge,
    open_lock_in,
    open_magnet_supply,
    open_temperature_controller,
)
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


async def open_bench(
    rig: Rig, manager: pyvisa.ResourceManager, *, inline: bool, dialects: Path = Path()
) -> Bench:
    """Open every instrument of a rig and prove who is there.

    Parameters
    ----------
    rig : Rig
        Addresses and dialects.
    manager : pyvisa.ResourceManager
        Of a VISA library, or of the simulated rig.
    inline : bool
        Exchanges run in the event loop itself, for a clock that jumps; otherwise in a thread of
        each link's own.
    dialects : Path
        Folder to which the paths of a laboratory's own dialect files are relative.

    Raises
    ------
    LinkError
        An instrument does not answer, or is another one; nothing stays open.
    DialectError
        A dialect does not exist or is wrong.
    """
    opened: list[Any] = []

    def link(name: str, spoken: Spoken) -> dict[str, Any]:
        dialect = spoken.dialect
        own = dialect.endswith(".toml")
        return {
            "manager": manager,
            "address": spoken.address,
            "dialect": load_dialect(dialects / dialect if own else dialect),
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
