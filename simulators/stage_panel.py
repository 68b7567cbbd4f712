"""The front panel of the temperature controller, in the project's own command tree."""

from collections.abc import Callable
from dataclasses import replace

from simulators.front_panel import Command, FrontPanel, Numeric
from simulators.serials import serial_of
from simulators.status import Refused
from simulators.syntax import nr3
from simulators.world import World

OPERATION_SETTLING = 1 << 1
OPERATION_SWEEPING = 1 << 3
OPERATION_RECHARGING = 1 << 9
QUESTIONABLE_TEMPERATURE = 1 << 4
_GAIN_MAX = 1e6


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
        point = Numeric("K", stage.base_k, p.maximum_k, stage.base_k)
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
            Command(
                "OUTPut:HEATer:RANGe",
                get=lambda: nr3(stage.heater_limit_w),
                set=self._advanced(stage.set_heater_limit),
                numeric=Numeric("W", 0.0, p.ranges_w[-1], p.ranges_w[-1]),
            ),
            Command(
                "OUTPut:HEATer:RANGe:CATalog", get=lambda: ",".join(nr3(r) for r in p.ranges_w)
            ),
            self._gain("PROPortional", "proportional_w_per_k"),
            self._gain("INTegral", "integral_w_per_k_s"),
            self._gain("DERivative", "derivative_w_s_per_k"),
            Command(
                "SOURce:TEMPerature:LOOP:AUTO",
                get=lambda: "0" if stage.gains_set else "1",
                set_boolean=self._set_auto,
            ),
            Command("SOURce:CHARge:RECHarge", do=self._recharge),
            Command("MEASure:CHARge", get=self._charge),
            Command("MEASure:TEMPerature", get=self._temperature),
            Command("MEASure:HEATer:POWer", get=self._power),
        ]

    def _gain(self, node: str, attribute: str) -> Command:
        """One gain of the loop, in SI units without a suffix."""

        def get() -> str:
            self._world.advance()
            return nr3(getattr(self._stage.gains, attribute))

        def set_gain(value: float) -> None:
            self._world.advance()
            self._stage.set_gains(replace(self._stage.gains, **{attribute: value}))

        return Command(
            f"SOURce:TEMPerature:LOOP:{node}",
            get=get, set=set_gain, numeric=Numeric("", 0.0, _GAIN_MAX),
        )  # fmt: skip

    def pending(self) -> bool:
        """The set-point ramps, or the thermometer has not come to it."""
        return self.operation() != 0

    def operation(self) -> int:
        """Bit 1: thermometer further than 1 % from the set-point, heater on. Bit 3: it ramps.

        Bit 9: the cold end is being recharged.
        """
        self._world.advance()
        stage = self._stage
        away = abs(stage.thermometer_k - stage.setpoint_k) > 0.01 * stage.setpoint_k
        bits = OPERATION_SETTLING if away and stage.heater_on else 0
        bits |= OPERATION_RECHARGING if stage.charge.recharging else 0
        return bits | (OPERATION_SWEEPING if stage.ramping else 0)

    def questionable(self) -> int:
        """Bit 4: the charge of the cold end is spent or being renewed; the base is not held."""
        self._world.advance()
        return QUESTIONABLE_TEMPERATURE if self._stage.charge.spent else 0

    def reset(self) -> None:
        """Heater off, set-point at base, no ramp, highest range, default loop.

        A recharge goes on.
        """
        self._world.advance()
        stage = self._stage
        stage.set_heater(False)
        stage.set_rate(0.0)
        stage.set_setpoint(stage.base_k)
        stage.set_heater_limit(stage.parameters.ranges_w[-1])
        stage.set_gains(None)

    def _advanced(self, order: Callable[[float], None]) -> Callable[[float], None]:
        def step(value: float) -> None:
            self._world.advance()
            order(value)

        return step

    def _set_heater(self, on: bool) -> None:
        self._world.advance()
        self._stage.set_heater(on)

    def _set_auto(self, on: bool) -> None:
        self._world.advance()
        self._stage.set_gains(None if on else self._stage.gains)

    def _one_shot(self) -> None:
        self._world.advance()
        if not self._stage.charge.limited:
            raise Refused(-241, "the cold end has no charge")

    def _recharge(self) -> None:
        self._one_shot()
        if self._stage.charge.recharging:
            raise Refused(-221, "it is being recharged")
        self._stage.charge.recharge()

    def _charge(self) -> str:
        self._one_shot()
        return nr3(self._stage.charge.left_j)

    def _temperature(self) -> str:
        self._world.advance()
        noise = self._stage.parameters.noise_k * self._noise.take()
        return nr3(self._stage.thermometer_k + noise)

    def _power(self) -> str:
        self._world.advance()
        return nr3(self._stage.heater_w)
