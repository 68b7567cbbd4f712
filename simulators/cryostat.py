"""The sample stage as its controller and the world see it: orders, temperatures, heater.

With constant coefficients and the default loop it moves in closed form (`linear_stage`), else on a
fixed grid of times (`stepped_stage`). Gains set by hand change over to the grid, and the default
loop back again where nothing else needs the grid.
"""

from collections.abc import Callable

from simulators.charge import Charge
from simulators.linear_stage import LinearStage
from simulators.stage_parameters import Gains, StageParameters, StageState
from simulators.stepped_stage import SteppedStage

__all__ = ["Gains", "Stage", "StageParameters"]


def _nothing(field_t: float) -> float:
    return 0.0


class Stage:
    """State of stage, sample temperature, thermometer, set-point and heater.

    Parameters
    ----------
    parameters : StageParameters
    excitation_w : callable
        Power that the excitation leaves in the sample, at a field.
    """

    def __init__(
        self, parameters: StageParameters, excitation_w: Callable[[float], float] = _nothing
    ) -> None:
        p = parameters
        self.parameters = p
        self.setpoint_k = p.start_k
        self.setpoint_rate_k_per_s = 0.0
        self.heater_on = False
        self.heater_limit_w = p.ranges_w[-1]
        self.charge = Charge(p)
        self._excitation_w = excitation_w
        self._gains: Gains | None = None
        start = StageState(p.start_k, p.start_k, p.start_k, 0.0, False, p.start_k)
        self._way = self._begin(start)

    def _begin(self, state: StageState) -> LinearStage | SteppedStage:
        p = self.parameters
        if p.constant and self._gains is None:
            return LinearStage(p, state, self.heater_limit_w)
        return SteppedStage(p, state, self.heater_limit_w, self.charge, self._excitation_w)

    # -- orders ----------------------------------------------------------------------------

    def set_heater(self, on: bool) -> None:
        """Switch the loop on, from zero power, or the heater off."""
        self.heater_on = on
        self._way.set_heater(on)

    def set_heater_limit(self, power_w: float) -> None:
        """Choose the smallest range of the heater that gives this power, or the largest."""
        ranges_w = self.parameters.ranges_w
        self.heater_limit_w = next((r for r in ranges_w if r >= power_w), ranges_w[-1])
        self._way.set_limit(self.heater_limit_w)

    def set_setpoint(self, temperature_k: float) -> None:
        """New end of the set-point's ramp; at once if the ramp's rate is 0."""
        self.setpoint_k = temperature_k
        self._way.aim(self.setpoint_k, self.setpoint_rate_k_per_s)

    def set_rate(self, rate_k_per_s: float) -> None:
        """Rate of the set-point, K/s; 0 is at once."""
        self.setpoint_rate_k_per_s = rate_k_per_s
        self._way.aim(self.setpoint_k, self.setpoint_rate_k_per_s)

    @property
    def gains_set(self) -> bool:
        """Whether the loop has gains set by hand."""
        return self._gains is not None

    @property
    def gains(self) -> Gains:
        """Gains in force: as set, or as the default loop has them at this temperature."""
        if self._gains is not None:
            return self._gains
        if isinstance(self._way, SteppedStage):
            return self._way.tuned(self._way.stage_k)
        return self._way.tuned()

    def set_gains(self, gains: Gains | None) -> None:
        """Gains of the loop; None is the default loop, critically damped at each temperature."""
        changes = self.parameters.constant and (gains is None) != (self._gains is None)
        self._gains = gains
        if changes:
            self._way = self._begin(self._way.state())
            self._way.aim(self.setpoint_k, self.setpoint_rate_k_per_s)
        if isinstance(self._way, SteppedStage):
            self._way.gains = gains

    # -- what can be seen ------------------------------------------------------------------

    @property
    def base_k(self) -> float:
        """Lowest set-point: the base while the cold end is cold."""
        return self.parameters.cold_k

    @property
    def stage_k(self) -> float:
        """Temperature of the stage."""
        return self._way.stage_k

    @property
    def sample_k(self) -> float:
        """Temperature of the sample."""
        return self._way.sample_k

    @property
    def thermometer_k(self) -> float:
        """What the thermometer shows, without its noise."""
        return self._way.thermometer_k

    @property
    def sample_slope_k_per_s(self) -> float:
        """Rate of change of the sample's temperature."""
        return self._way.sample_slope_k_per_s

    @property
    def ramping(self) -> bool:
        """Whether the set-point in force is on its way."""
        return self._way.ramping

    @property
    def heater_w(self) -> float:
        """Heater power."""
        return self._way.heater_w

    # -- time ------------------------------------------------------------------------------

    def horizon_s(self) -> float:
        """Longest time by which it may be advanced."""
        return self._way.horizon_s()

    def advance(self, duration_s: float, field_rate_t_per_s: float, field_t: float = 0.0) -> None:
        """Move by a time not beyond `horizon_s`.

        Parameters
        ----------
        duration_s : float
        field_rate_t_per_s, field_t : float
            Rate of the coil's field during it, and the field at its start.
        """
        self._way.advance(duration_s, field_rate_t_per_s, field_t)
