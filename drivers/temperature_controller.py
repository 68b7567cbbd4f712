"""A temperature controller, spoken through a dialect."""

from drivers.capabilities import StageState, Written
from drivers.speaking import Speaker


class ScpiTemperatureController(Speaker):
    """`drivers.capabilities.TemperatureController` over a link."""

    async def read(self) -> StageState:
        """One look; one exchange if the dialect joins queries. Raises LinkError."""
        values = await self._read_values()
        return StageState(
            temperature_k=values["temperature"],
            setpoint_k=values["setpoint"],
            heater_w=values["heater"],
        )

    async def write_setpoint(self, temperature_k: float) -> Written:
        """Set the set-point, K."""
        return await self._write("setpoint", temperature_k)

    async def write_setpoint_ramp(self, rate_k_per_s: float) -> Written:
        """Set the rate at which the set-point in force moves, K/s."""
        return await self._write("setpoint_ramp", rate_k_per_s)

    async def write_heater(self, on: bool) -> Written:
        """Turn the loop's heater on or off."""
        return await self._write("heater", on)
