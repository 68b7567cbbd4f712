"""Small invented worlds and a clock that is set by hand."""

from dataclasses import dataclass, replace

from simulators.coil import CoilParameters
from simulators.cryostat import StageParameters
from simulators.helium import HeliumParameters
from simulators.lockin import LockInParameters
from simulators.sample import Orbit, SampleParameters
from simulators.world import GaugeParameters, World, WorldParameters


@dataclass
class Clock:
    """Time that moves when told."""

    time_s: float = 0.0

    def __call__(self) -> float:
        return self.time_s


def quiet() -> WorldParameters:
    """A rig without any noise, whose coil has no persistent switch."""
    return WorldParameters(
        seed=7,
        coil=CoilParameters(voltage_noise_v=0.0, field_noise_t=0.0, switch_present=False),
        stage=StageParameters(start_k=1.5, noise_k=0.0),
        sample=SampleParameters(
            orbits=(
                Orbit(300.0, mass=0.1, dingle_k=1.0, amplitude=0.5),
                Orbit(410.0, mass=0.25, dingle_k=0.8, amplitude=0.4, phase=0.3, g_factor=2.0),
            )
        ),
        helium=HeliumParameters(static_w=0.0, ramp_w_s2_per_t2=0.0, switch_heater_w=0.0),
        lock_ins=(
            LockInParameters("xx", noise_v_per_rthz=0.0),
            LockInParameters("xy", measures="hall", noise_v_per_rthz=0.0, order=1),
        ),
        gauges=(GaugeParameters(noise_percent=0.0),),
    )


def with_coil(parameters: WorldParameters, **changes: object) -> WorldParameters:
    """The same rig with another coil."""
    return replace(parameters, coil=replace(parameters.coil, **changes))  # type: ignore[arg-type]


def sweep(world: World, target_t: float, rate_t_per_s: float) -> None:
    """Order a ramp, as the supply would take it."""
    world.advance()
    world.coil.target_t = target_t
    world.coil.rate_t_per_s = rate_t_per_s
    world.coil.ramping = True
