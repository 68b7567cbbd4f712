"""A lock-in amplifier, spoken through a dialect."""

from drivers.capabilities import LockInState, Written
from drivers.speaking import Speaker


class ScpiLockIn(Speaker):
    """`drivers.capabilities.LockIn` over a link.

    A setting that the dialect lacks raises `drivers.speaking.Lacking`.
    """

    async def read(self) -> LockInState:
        """One look; one exchange if the dialect joins queries. Raises LinkError."""
        values = await self._read_values()
        return LockInState(x_v=values["x"], y_v=values["y"], overload=bool(values["overload"]))

    async def write_time_constant(self, time_constant_s: float) -> Written:
        """Set the filter's time constant, s."""
        return await self._write("time_constant", time_constant_s)

    async def write_filter_order(self, poles: int) -> Written:
        """Set the number of the filter's poles."""
        return await self._write("filter_order", poles)

    async def write_sensitivity(self, full_scale_v: float) -> Written:
        """Set the full scale, V rms."""
        return await self._write("sensitivity", full_scale_v)

    async def write_amplitude(self, amplitude_v: float) -> Written:
        """Set the oscillator's output, V rms."""
        return await self._write("amplitude", amplitude_v)

    async def write_frequency(self, frequency_hz: float) -> Written:
        """Set the oscillator's frequency, Hz."""
        return await self._write("frequency", frequency_hz)
