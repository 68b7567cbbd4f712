"""The typed capabilities that a night needs of its instruments.

SI units throughout; conversion to what an instrument speaks happens in its dialect. Every write
reads the value back from the instrument, and returns both ends of that exchange.
"""

from dataclasses import dataclass
from typing import Protocol


@dataclass(frozen=True, slots=True)
class Written:
    """What a write did: the text that was sent, and the value that the instrument then reports."""

    sent: str
    read_back: float | bool


@dataclass(frozen=True, slots=True)
class MagnetState:
    """One look at a magnet supply. Field and current are of the supply's output."""

    field_t: float
    current_a: float
    voltage_v: float
    ramping: bool
    quench: bool
    switch_heater: bool
    persistent_field_t: float


@dataclass(frozen=True, slots=True)
class StageState:
    """One look at a temperature controller's loop."""

    temperature_k: float
    setpoint_k: float
    heater_w: float


@dataclass(frozen=True, slots=True)
class LockInState:
    """One look at a lock-in amplifier: X and Y belong to the same instant."""

    x_v: float
    y_v: float
    overload: bool


class Instrument(Protocol):
    """What every instrument can do."""

    async def identity(self) -> str:
        """Reply to ``*IDN?`` or the dialect's equivalent, stripped."""
        ...

    async def close(self) -> None:
        """Close the link; safe to call twice."""
        ...


class MagnetSupply(Instrument, Protocol):
    """A supply that ramps a superconducting magnet towards a target field at a set rate."""

    async def read(self) -> MagnetState: ...

    async def read_rate(self) -> float:
        """Ramp rate in force, T/s."""
        ...

    async def read_target(self) -> float:
        """Target in force, T."""
        ...

    async def write_rate(self, rate_t_per_s: float) -> Written: ...

    async def write_target(self, field_t: float) -> Written: ...

    async def write_ramping(self, ramping: bool) -> Written:
        """True lets the supply ramp towards its target; False makes it hold where it is."""
        ...

    async def write_switch_heater(self, on: bool) -> Written: ...


class TemperatureController(Instrument, Protocol):
    """A controller whose loop holds the sample stage at a set-point, approached at a set rate."""

    async def read(self) -> StageState: ...

    async def write_setpoint(self, temperature_k: float) -> Written: ...

    async def write_setpoint_ramp(self, rate_k_per_s: float) -> Written: ...

    async def write_heater(self, on: bool) -> Written: ...


class LockIn(Instrument, Protocol):
    """A lock-in amplifier with an oscillator output that excites the sample."""

    async def read(self) -> LockInState: ...

    async def write_time_constant(self, time_constant_s: float) -> Written: ...

    async def write_filter_order(self, poles: int) -> Written: ...

    async def write_sensitivity(self, full_scale_v: float) -> Written: ...

    async def write_amplitude(self, amplitude_v: float) -> Written:
        """Oscillator output, V rms."""
        ...

    async def write_frequency(self, frequency_hz: float) -> Written: ...


class Gauge(Instrument, Protocol):
    """Anything that reads one number: a level, a pressure, a flow."""

    async def read(self) -> float: ...
