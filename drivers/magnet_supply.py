"""A magnet supply, spoken through a dialect."""

from drivers.capabilities import MagnetState, Written
from drivers.speaking import Speaker


class ScpiMagnetSupply(Speaker):
    """`drivers.capabilities.MagnetSupply` over a link."""

    async def read(self) -> MagnetState:
        """One look; one exchange if the dialect joins queries. Raises LinkError."""
        values = await self._read_values()
        return MagnetState(
            field_t=values["field"],
            current_a=values["current"],
            voltage_v=values["voltage"],
            ramping=bool(values["ramping"]),
            quench=bool(values["quench"]),
            switch_heater=bool(values["switch_heater"]),
            persistent_field_t=values["persistent_field"],
        )

    async def read_rate(self) -> float:
        """Ramp rate in force, T/s."""
        return await self._read_setting("rate")

    async def read_target(self) -> float:
        """Target in force, T."""
        return await self._read_setting("target")

    async def write_rate(self, rate_t_per_s: float) -> Written:
        """Set the ramp rate, T/s."""
        return await self._write("rate", rate_t_per_s)

    async def write_target(self, field_t: float) -> Written:
        """Set the target field, T."""
        return await self._write("target", field_t)

    async def write_ramping(self, ramping: bool) -> Written:
        """True: ramp towards the target. False: hold where it is."""
        return await self._write("ramping", ramping)

    async def write_switch_heater(self, on: bool) -> Written:
        """Heater of the persistent switch. Raises Lacking if the dialect has none."""
        return await self._write("switch_heater", on)
