"""The front panel of the temperature controller, in the project's own command tree."""

from collections.abc import Callable

from simulators.front_panel import Command, FrontPanel, Numeric
from simulators.serials import serial_of
from simulators.syntax import nr3
from simulators.world import World

OPERATION_SETTLING = 1 << 1
OPERATION_SWEEPING = 1 << 3


class StagePanel(FrontPanel):
    """A temperature controller on a world's sample stage."""

    def __init__(self, world: World, name: str = "stage") -> None:
        self._world = world
        self._stage = world.stage
        self._noise = world.noise(name)
        super().__init__("SIMULATED TEMPERATURE CONTROLLER", serial_of(world, name))

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

    def pending(self) -> bool:
        """The set-point ramps, or the thermometer has not come to it."""
        return self.operation() != 0

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
