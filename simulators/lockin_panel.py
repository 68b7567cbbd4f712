"""The front panel of a lock-in amplifier, in the project's own command tree."""

import math
from collections.abc import Callable

from simulators.front_panel import Command, FrontPanel, Numeric
from simulators.lockin_parameters import FULL_SCALE_MAX_V, FULL_SCALE_MIN_V
from simulators.serials import serial_of
from simulators.status import Refused
from simulators.syntax import nr3
from simulators.world import World

QUESTIONABLE_OVERLOAD = 1 << 0
QUESTIONABLE_INPUT = 1 << 9
FREQUENCY_MIN_HZ = 1e-3
FREQUENCY_MAX_HZ = 1e5
HARMONIC_MAX = 99
_TURN_RAD = 2 * math.pi * (1 + 1e-12)  # 360 degrees, after the arithmetic of the suffix


class LockInPanel(FrontPanel):
    """A lock-in amplifier of a world, by name."""

    def __init__(self, world: World, name: str) -> None:
        self._world = world
        self._lock_in = world.lock_ins[name]
        super().__init__("SIMULATED LOCK-IN", serial_of(world, name))

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
            *self._ranging(),
            Command("INPut:RANGe", get=lambda: nr3(p.input_range_v)),
            Command(
                "SOURce:VOLTage:AMPLitude",
                get=lambda: nr3(lock_in.amplitude_v),
                set=self._advanced(lock_in.set_amplitude),
                numeric=Numeric("V", 0.0, 10.0),
            ),
            Command(
                "SOURce:FREQuency",
                get=lambda: nr3(lock_in.frequency_hz),
                set=self._advanced(lock_in.set_frequency),
                # What is detected stays within the frequencies of the instrument.
                numeric=Numeric("HZ", FREQUENCY_MIN_HZ, self._frequency_most_hz),
            ),
            Command(
                "SENSe:HARMonic",
                get=lambda: str(lock_in.harmonic),
                set=self._advanced(lambda harmonic: lock_in.set_harmonic(int(harmonic))),
                numeric=Numeric("", 1, self._harmonic_most, 1, integer=True),
            ),
            Command(
                "SENSe:PHASe",
                get=lambda: nr3(lock_in.phase_rad),
                set=self._advanced(lock_in.set_phase),
                numeric=Numeric("RAD", -_TURN_RAD, _TURN_RAD, 0.0),
            ),
        ]

    def _ranging(self) -> list[Command]:
        lock_in = self._lock_in
        ranges_v = lock_in.parameters.full_scales_v
        ends_v = ranges_v or (FULL_SCALE_MIN_V, FULL_SCALE_MAX_V)
        return [
            Command(
                "SENSe:VOLTage:RANGe",
                get=lambda: nr3(lock_in.full_scale_v),
                set=self._advanced(lock_in.set_range),
                numeric=Numeric("V", ends_v[0], ends_v[-1]),
            ),
            Command(
                "SENSe:VOLTage:RANGe:AUTO",
                get=lambda: "0",
                set_boolean=self._keep_ranging,
                words={"ONCE": self._range_once},
            ),
            Command(
                "SENSe:VOLTage:RANGe:CATalog",
                get=lambda: ",".join(nr3(value) for value in ends_v),
            ),
        ]

    def _frequency_most_hz(self) -> float:
        return FREQUENCY_MAX_HZ / self._lock_in.harmonic

    def _harmonic_most(self) -> float:
        return min(HARMONIC_MAX, int(FREQUENCY_MAX_HZ / self._lock_in.frequency_hz))

    def questionable(self) -> int:
        """Bit 0: X and Y are not to be trusted. Bit 9: because of the input; else of the output."""
        self._world.advance()
        if self._lock_in.input_overload:
            return QUESTIONABLE_OVERLOAD | QUESTIONABLE_INPUT
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

    def _range_once(self) -> None:
        self._world.advance()
        self._lock_in.range_once()

    def _keep_ranging(self, on: bool) -> None:
        if on:
            raise Refused(-224, "only ONCE, or OFF")

    def _xy(self) -> str:
        self._world.advance()
        x, y = self._lock_in.read()
        return f"{nr3(x)},{nr3(y)}"
