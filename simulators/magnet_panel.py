"""The front panel of the magnet supply, in the project's own command tree."""

import math

from simulators.front_panel import Command, FrontPanel, Numeric
from simulators.serials import serial_of
from simulators.status import Refused
from simulators.syntax import nr3
from simulators.world import World

QUESTIONABLE_QUENCH = 1 << 9
OPERATION_SWEEPING = 1 << 3
OPERATION_SWITCH_WARM = 1 << 8


class MagnetPanel(FrontPanel):
    """A magnet supply on a world's coil."""

    def __init__(self, world: World, name: str = "magnet") -> None:
        self._world = world
        self._coil = world.coil
        self._noise = world.noise(name)
        super().__init__("SIMULATED MAGNET SUPPLY", serial_of(world, name))

    def commands(self) -> list[Command]:
        """The magnet supply's commands."""
        coil = self._coil
        p = coil.parameters
        field = Numeric("T", -p.field_max_t, p.field_max_t, 0.0)
        rate = Numeric("T/S", p.rate_resolution_t_per_s, math.inf, p.default_rate_t_per_s)
        return [
            Command(
                "SOURce:FIELd:TARGet",
                get=lambda: nr3(coil.target_t), set=self._set_target, numeric=field,
            ),
            Command(
                "SOURce:FIELd:RATE",
                get=lambda: nr3(coil.rate_t_per_s), set=self._set_rate, numeric=rate,
            ),
            Command("SOURce:FIELd:RATE:TABLe", get=self._rate_table),
            Command("SOURce:FIELd:LIMit", get=lambda: nr3(p.field_max_t)),
            Command("SOURce:FIELd:RAMP:STATe", get=self._ramping, set_boolean=self._set_ramping),
            Command("OUTPut:SWITch:HEATer", get=self._heater, set_boolean=self._set_heater),
            Command("SOURce:FIELd:PERSistent", get=self._persistent),
            Command("MEASure:FIELd", get=self._field),
            Command("MEASure:CURRent", get=self._current),
            Command("MEASure:VOLTage", get=self._voltage),
            Command("MEASure:COIL:TEMPerature", get=self._coil_temperature),
        ]  # fmt: skip

    def pending(self) -> bool:
        """A ramp is under way."""
        self._world.advance()
        return self._coil.lead_velocity_t_per_s != 0.0

    def self_test(self) -> int:
        """1 while a quench is latched."""
        self._world.advance()
        return int(self._coil.quenched)

    def operation(self) -> int:
        """Bit 3: the output's field moves. Bit 8: the switch is warm."""
        self._world.advance()
        bits = OPERATION_SWEEPING if self._coil.lead_velocity_t_per_s else 0
        return bits | (OPERATION_SWITCH_WARM if self._coil.warm and self._has_switch else 0)

    @property
    def _has_switch(self) -> bool:
        return self._coil.parameters.switch_present

    def questionable(self) -> int:
        """Bit 9: quench, latched until *RST."""
        self._world.advance()
        return QUESTIONABLE_QUENCH if self._coil.quenched else 0

    def reset(self) -> None:
        """Hold, heater off, defaults; a quench that is over is forgotten."""
        self._world.advance()
        self._coil.reset()

    def _ready(self) -> None:
        self._world.advance()
        if self._coil.quenched:
            raise Refused(-221, "quench detected")

    def _set_target(self, field_t: float) -> None:
        self._ready()
        self._coil.target_t = field_t

    def _set_rate(self, rate_t_per_s: float) -> None:
        self._ready()
        resolution = self._coil.parameters.rate_resolution_t_per_s
        self._coil.rate_t_per_s = math.floor(rate_t_per_s / resolution + 1e-6) * resolution

    def _set_ramping(self, on: bool) -> None:
        self._world.advance()
        if on:
            self._ready()
        self._coil.ramping = on

    def _ramping(self) -> str:
        self._world.advance()
        return "1" if self._coil.ramping else "0"

    def _set_heater(self, on: bool) -> None:
        self._world.advance()
        if not self._has_switch:
            raise Refused(-241, "no persistent switch")
        if on:
            self._ready()
        if not self._coil.quenched:
            self._coil.set_heater(on)

    def _heater(self) -> str:
        self._world.advance()
        return "1" if self._coil.heater else "0"

    def _persistent(self) -> str:
        self._world.advance()
        return nr3(self._coil.persistent_t)

    def _rate_table(self) -> str:
        """Pairs of largest field and rate; a supply without a table has one zone."""
        p = self._coil.parameters
        zones = p.supply_rates or ((p.field_max_t, math.inf),)
        return ",".join(f"{nr3(up_to)},{nr3(rate)}" for up_to, rate in zones)

    def _coil_temperature(self) -> str:
        self._world.advance()
        return nr3(self._coil.heat.coil_k)

    def _field(self) -> str:
        self._world.advance()
        coil = self._coil
        return nr3(coil.lead_t + coil.parameters.field_noise_t * self._noise.take())

    def _current(self) -> str:
        self._world.advance()
        p = self._coil.parameters
        field_t = self._coil.lead_t + p.field_noise_t * self._noise.take()
        return nr3(field_t / p.coil_constant_t_per_a)

    def _voltage(self) -> str:
        self._world.advance()
        coil = self._coil
        return nr3(coil.voltage_v + coil.parameters.voltage_noise_v * self._noise.take())
