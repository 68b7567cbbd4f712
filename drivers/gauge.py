"""A gauge of one number, spoken through a dialect."""

from drivers.speaking import Speaker


class ScpiGauge(Speaker):
    """`drivers.capabilities.Gauge` over a link."""

    async def read(self) -> float:
        """The reading: percent for a level, Pa for a pressure. Raises LinkError."""
        return (await self._read_values())["reading"]
