"""The front panel of a lock-in amplifier, in the project's own command tree."""

from collections.abc import Callable

from simulators.front_panel import Command, FrontPanel, Numeric
from simulators.serials import serial_of
from simulators.syntax import nr3
from simulators.world import World

QUESTIONABLE_OVERLOAD = 1 << 0


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
