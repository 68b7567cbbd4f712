"""The front panel of a level gauge, in the project's own command tree."""

from simulators.front_panel import Command, FrontPanel
from simulators.serials import serial_of
from simulators.syntax import nr3
from simulators.world import World


class GaugePanel(FrontPanel):
    """A level gauge of a world, by name."""

    def __init__(self, world: World, name: str) -> None:
        self._world = world
        self._gauge = world.gauges[name]
        self._noise = world.noise(name)
        super().__init__("SIMULATED GAUGE", serial_of(world, name))

    def commands(self) -> list[Command]:
        """The gauge's command."""
        return [Command("MEASure:LEVel", get=self._level)]

    def _level(self) -> str:
        self._world.advance()
        shown = self._world.helium.percent + self._gauge.noise_percent * self._noise.take()
        return nr3(min(100.0, max(0.0, shown)))
