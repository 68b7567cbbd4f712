"""The bench: the opened instruments of a rig as typed capabilities, and the channels they fill."""

import asyncio
from dataclasses import dataclass

from drivers.capabilities import Gauge, LockIn, MagnetSupply, TemperatureController
from orchestrator.config.rig import Rig
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
