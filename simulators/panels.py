"""The four front panels of a simulated rig, in the project's own command tree."""

import math
import zlib
from collections.abc import Callable

from simulators.front_panel import Command, FrontPanel, Numeric
from simulators.status import Refused
from simulators.syntax import nr3
from simulators.world import World

QUESTIONABLE_QUENCH = 1 << 9
QUESTIONABLE_OVERLOAD = 1 << 0
OPERATION_SETTLING = 1 << 1
OPERATION_SWEEPING = 1 << 3
OPERATION_SWITCH_WARM = 1 << 8


def _serial(world: World, name: str) -> str:
    return f"{zlib.crc32(f'{world.parameters.seed}/{name}'.encode()):08X}"


class MagnetPanel(FrontPanel):
    """A magnet supply on a world's coil."""

    def __init__(self, world: World, name: str = "magnet") -> None:
        self._world = world
        self._coil = world.coil
        self._noise = world.noise(name)
        super().__init__("SIMULATED MAGNET SUPPLY", _serial(world, name))

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
            Command("SOURce:FIELd:LIMit", get=lambda: nr3(p.field_max_t)),
            Command("SOURce:FIELd:RAMP:STATe", get=self._ramping, set_boolean=self._set_ramping),
            Command("OUTPut:SWITch:HEATer", get=self._heater, set_boolean=self._set_heater),
            Command("SOURce:FIELd:PERSistent", get=self._persistent),
            Command("MEASure:FIELd", get=self._field),
            Command("MEASure:CURRent", get=self._current),
            Command("MEASure:VOLTage", get=self._voltage),
        ]  # fmt: skip

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


class StagePanel(FrontPanel):
    """A temperature controller on a world's sample stage."""

    def __init__(self, world: World, name: str = "stage") -> None:
        self._world = world
        self._stage = world.stage
        self._noise = world.noise(name)
        super().__init__("SIMULATED TEMPERATURE CONTROLLER", _serial(world, name))

    def commands(self) -> list[Command]:
        """The temperature controller's commands."""
        stage = self._stage
        p = stage.parameters
        point = Numeric("K", p.base_k, p.maximum_k, p.base_k)
        return [
            Command(
                "SOURce:TEMPerature:SPOint",
                get=lambda: nr3(stage.setpoint_k),
                set=self._advanced(stage.set_setpoint),
                numeric=point,
            ),
            Command(
                "SOURce:TEMPerature:RATE",
                get=lambda: nr3(stage.setpoint_rate_k_per_s),
                set=self._advanced(stage.set_rate),
                numeric=Numeric("K/S", 0.0, 1.0, 0.0),
            ),
            Command("SOURce:TEMPerature:LIMit", get=lambda: nr3(p.maximum_k)),
            Command(
                "OUTPut:HEATer:STATe",
                get=lambda: "1" if stage.heater_on else "0",
                set_boolean=self._set_heater,
            ),
            Command("MEASure:TEMPerature", get=self._temperature),
            Command("MEASure:HEATer:POWer", get=self._power),
        ]

    def operation(self) -> int:
        """Bit 1: thermometer further than 1 % from the set-point, heater on. Bit 3: it ramps."""
        self._world.advance()
        stage = self._stage
        away = abs(stage.thermometer_k - stage.setpoint_k) > 0.01 * stage.setpoint_k
        bits = OPERATION_SETTLING if away and stage.heater_on else 0
        return bits | (OPERATION_SWEEPING if stage.ramping else 0)

    def reset(self) -> None:
        """Heater off, set-point at base, no ramp."""
        self._world.advance()
        self._stage.set_heater(False)
        self._stage.set_rate(0.0)
        self._stage.set_setpoint(self._stage.parameters.base_k)

    def _advanced(self, order: Callable[[float], None]) -> Callable[[float], None]:
        def step(value: float) -> None:
            self._world.advance()
            order(value)

        return step

    def _set_heater(self, on: bool) -> None:
        self._world.advance()
        self._stage.set_heater(on)

    def _temperature(self) -> str:
        self._world.advance()
        noise = self._stage.parameters.noise_k * self._noise.take()
        return nr3(self._stage.thermometer_k + noise)

    def _power(self) -> str:
        self._world.advance()
        return nr3(self._stage.heater_w)


class LockInPanel(FrontPanel):
    """A lock-in amplifier of a world, by name."""

    def __init__(self, world: World, name: str) -> None:
        self._world = world
        self._lock_in = world.lock_ins[name]
        super().__init__("SIMULATED LOCK-IN", _serial(world, name))

    def commands(self) -> list[Command]:
        """The lock-in's commands."""
        lock_in = self._lock_in
        p = lock_in.parameters
        return [
            Command("MEASure:XY", get=self._xy),
            Command(
                "SENSe:FILTer:TCONstant",
                get=lambda: nr3(lock_in.time_constant_s),
                set=self._advanced(lock_in.set_time_constant),
                numeric=Numeric("S", 1e-4, 1e3, p.time_constant_s),
            ),
            Command(
                "SENSe:FILTer:ORDer",
                get=lambda: str(lock_in.order),
                set=self._advanced(lambda order: lock_in.set_order(int(order))),
                numeric=Numeric("", 1, 4, p.order, integer=True),
            ),
            self._setting("SENSe:VOLTage:RANGe", "full_scale_v", Numeric("V", 1e-9, 10.0)),
            self._setting("SOURce:VOLTage:AMPLitude", "amplitude_v", Numeric("V", 0.0, 10.0)),
            self._setting("SOURce:FREQuency", "frequency_hz", Numeric("HZ", 1e-3, 1e5)),
        ]

    def _setting(self, header: str, attribute: str, numeric: Numeric) -> Command:
        lock_in = self._lock_in
        return Command(
            header,
            get=lambda: nr3(getattr(lock_in, attribute)),
            set=self._advanced(lambda value: setattr(lock_in, attribute, value)),
            numeric=numeric,
        )

    def questionable(self) -> int:
        """Bit 0: overload."""
        self._world.advance()
        return QUESTIONABLE_OVERLOAD if self._lock_in.overload else 0

    def reset(self) -> None:
        """Settings of power on; the filter starts empty."""
        self._world.advance()
        self._lock_in.reset()

    def _advanced(self, order: Callable[[float], None]) -> Callable[[float], None]:
        def step(value: float) -> None:
            self._world.advance()
            order(value)

        return step

    def _xy(self) -> str:
        self._world.advance()
        x, y = self._lock_in.read()
        return f"{nr3(x)},{nr3(y)}"


class GaugePanel(FrontPanel):
    """A level gauge of a world, by name."""

    def __init__(self, world: World, name: str) -> None:
        self._world = world
        self._gauge = world.gauges[name]
        self._noise = world.noise(name)
        super().__init__("SIMULATED GAUGE", _serial(world, name))

    def commands(self) -> list[Command]:
        """The gauge's command."""
        return [Command("MEASure:LEVel", get=self._level)]

    def _level(self) -> str:
        self._world.advance()
        shown = self._world.helium.percent + self._gauge.noise_percent * self._noise.take()
        return nr3(min(100.0, max(0.0, shown)))


def panels(world: World) -> dict[str, FrontPanel]:
    """Every panel of a world, by the rig's instrument names."""
    return {
        "magnet": MagnetPanel(world),
        "stage": StagePanel(world),
        **{name: LockInPanel(world, name) for name in world.lock_ins},
        **{name: GaugePanel(world, name) for name in world.gauges},
    }
