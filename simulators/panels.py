"""All front panels of a simulated rig."""

from simulators.front_panel import FrontPanel
from simulators.gauge_panel import GaugePanel
from simulators.lockin_panel import LockInPanel
from simulators.magnet_panel import MagnetPanel
from simulators.stage_panel import StagePanel
from simulators.world import World


def panels(world: World) -> dict[str, FrontPanel]:
    """Every panel of a world, by the rig's instrument names."""
    return {
        "magnet": MagnetPanel(world),
        "stage": StagePanel(world),
        **{name: LockInPanel(world, name) for name in world.lock_ins},
        **{name: GaugePanel(world, name) for name in world.gauges},
    }
