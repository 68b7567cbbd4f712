"""The sample stage: heat capacity, cooling, eddy heating, thermometer, and the heater's loop.

C dT/dt = P_heater + P_eddy - G (T - T_base). The loop integrates the set-point's error and acts
proportionally on the temperature alone, with gains that make the closed loop a critically damped
second-order lag, T/T_set = 1 / (1 + s t_r)^2. Everything between two events is linear, so a step of
any length is one multiplication by a matrix exponential; heater limits are events that are located.
"""

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

_T, _J, _SAMPLE, _THERMOMETER, _SET, _SET_RATE, _EDDY, _ONE = range(8)
_LAG_MIN_S = 1e-3
_EVENT_S = 1e-3


@dataclass(frozen=True, slots=True)
class StageParameters:
    """A heated sample stage and its controller.

    Attributes
    ----------
    base_k : float
        Temperature with the heater off; also the lowest set-point.
    maximum_k : float
        Highest set-point.
    start_k : float
        Temperature at power on.
    heat_capacity_j_per_k, cooling_w_per_k : float
        C and G, taken constant from base to maximum.
    heater_max_w : float
        The heater gives 0 to this.
    response_s : float
        t_r of the closed loop, less than 2 C / G.
    eddy_w_s2_per_t2 : float
        Eddy heating, P = this x (dB/dt)^2 (Ekin 2006).
    sample_lag_s, thermometer_lag_s : float
        First-order lags of sample and thermometer behind the stage.
    noise_k : float
        Standard deviation of one temperature reading.
    """

    base_k: float = 0.3
    maximum_k: float = 30.0
    start_k: float = 0.3
    heat_capacity_j_per_k: float = 0.05
    cooling_w_per_k: float = 0.002
    heater_max_w: float = 0.2
    response_s: float = 4.0
    eddy_w_s2_per_t2: float = 20.0
    sample_lag_s: float = 1.0
    thermometer_lag_s: float = 0.3
    noise_k: float = 2e-5

    def __post_init__(self) -> None:
        slowest = 2 * self.heat_capacity_j_per_k / self.cooling_w_per_k
        if not 0 < self.response_s < slowest:
            raise ValueError(
                f"response_s of the stage is {self.response_s} s; "
                f"allowed is 0 to {slowest} s, which is 2 C / G"
            )


class Stage:
    """State of stage, sample temperature, thermometer, set-point and heater."""

    def __init__(self, parameters: StageParameters) -> None:
        p = parameters
        self.parameters = p
        self._kp = 2 * p.heat_capacity_j_per_k / p.response_s - p.cooling_w_per_k
        self._ki = p.heat_capacity_j_per_k / p.response_s**2
        self._mode = "off"
        self._z = np.array([p.start_k, 0, p.start_k, p.start_k, p.start_k, 0, 0, 1.0])
        self.setpoint_k = p.start_k
        self.setpoint_rate_k_per_s = 0.0

    # -- orders ----------------------------------------------------------------------------

    @property
    def heater_on(self) -> bool:
        """Whether the loop may heat."""
        return self._mode != "off"

    def set_heater(self, on: bool) -> None:
        """Switch the loop on, from zero power, or the heater off."""
        if on and self._mode == "off":
            self._mode = "low"
        elif not on:
            self._mode = "off"

    def set_setpoint(self, temperature_k: float) -> None:
        """New end of the set-point's ramp; at once if the ramp's rate is 0."""
        self.setpoint_k = temperature_k
        self._aim()

    def set_rate(self, rate_k_per_s: float) -> None:
        """Rate of the set-point, K/s; 0 is at once."""
        self.setpoint_rate_k_per_s = rate_k_per_s
        self._aim()

    def _aim(self) -> None:
        if self.setpoint_rate_k_per_s == 0.0:
            self._z[_SET] = self.setpoint_k
        difference = self.setpoint_k - float(self._z[_SET])
        self._z[_SET_RATE] = math.copysign(self.setpoint_rate_k_per_s, difference)
        if difference == 0.0:
            self._z[_SET_RATE] = 0.0

    # -- what can be seen ------------------------------------------------------------------

    @property
    def stage_k(self) -> float:
        """Temperature of the stage."""
        return float(self._z[_T])

    @property
    def sample_k(self) -> float:
        """Temperature of the sample."""
        return float(self._z[_SAMPLE])

    @property
    def thermometer_k(self) -> float:
        """What the thermometer shows, without its noise."""
        return float(self._z[_THERMOMETER])

    @property
    def sample_slope_k_per_s(self) -> float:
        """Rate of change of the sample's temperature."""
        return float(self._z[_T] - self._z[_SAMPLE]) / max(self.parameters.sample_lag_s, _LAG_MIN_S)

    @property
    def ramping(self) -> bool:
        """Whether the set-point in force is on its way."""
        return bool(self._z[_SET_RATE] != 0.0)

    @property
    def heater_w(self) -> float:
        """Heater power."""
        if self._mode == "high":
            return self.parameters.heater_max_w
        return self._demand_w(self._z) if self._mode == "regulate" else 0.0

    def _demand_w(self, z: NDArray[np.float64]) -> float:
        return self._ki * float(z[_J]) - self._kp * (float(z[_T]) - self.parameters.base_k)

    # -- time ------------------------------------------------------------------------------

    def horizon_s(self) -> float:
        """Time until the set-point's ramp ends."""
        rate = float(self._z[_SET_RATE])
        return (self.setpoint_k - float(self._z[_SET])) / rate if rate else math.inf

    def advance(self, duration_s: float, field_rate_t_per_s: float) -> None:
        """Move by a time not beyond `horizon_s`, with the coil's rate as given."""
        ends_ramp = duration_s >= self.horizon_s() * (1 - 1e-12)
        self._z[_EDDY] = self.parameters.eddy_w_s2_per_t2 * field_rate_t_per_s**2
        left = duration_s
        while left > 0.0:
            step = left
            z = self._propagate(step) @ self._z
            if self._leaves(z) and step > _EVENT_S:
                step, z = self._locate(step, z)
            left -= step
            self._z = z
            self._turn()
        if ends_ramp:
            self._z[_SET] = self.setpoint_k
            self._z[_SET_RATE] = 0.0

    def _propagate(self, step_s: float) -> NDArray[np.float64]:
        return _transition(self.parameters, self._mode, step_s)

    def _locate(self, step_s: float, z: NDArray[np.float64]) -> tuple[float, NDArray[np.float64]]:
        """Shorten a step to just after the heater's limit is met or left, by bisection."""
        before, after = 0.0, step_s
        while after - before > _EVENT_S:
            middle = 0.5 * (before + after)
            trial = self._propagate(middle) @ self._z
            if self._leaves(trial):
                after, z = middle, trial
            else:
                before = middle
        return after, z

    def _leaves(self, z: NDArray[np.float64]) -> bool:
        """Whether the heater's mode ends at this state.

        At a limit the integral is held at what gives that limit; the loop regulates again as soon
        as its demand would move inward.
        """
        p = self.parameters
        if self._mode == "off":
            return False
        if self._mode == "regulate":
            return not -1e-12 <= self._demand_w(z) <= p.heater_max_w * (1 + 1e-12)
        heater_w = p.heater_max_w if self._mode == "high" else 0.0
        flow_w = heater_w + float(z[_EDDY]) - p.cooling_w_per_k * (float(z[_T]) - p.base_k)
        demand_slope = (
            self._ki * float(z[_SET] - z[_T]) - self._kp * flow_w / p.heat_capacity_j_per_k
        )
        return demand_slope < 0 if self._mode == "high" else demand_slope > 0

    def _turn(self) -> None:
        p = self.parameters
        if self._mode == "regulate" and self._leaves(self._z):
            self._mode = "high" if self._demand_w(self._z) > p.heater_max_w else "low"
        elif self._mode in {"high", "low"}:
            heater_w = p.heater_max_w if self._mode == "high" else 0.0
            self._z[_J] = (heater_w + self._kp * (float(self._z[_T]) - p.base_k)) / self._ki
            if self._leaves(self._z):
                self._mode = "regulate"


@lru_cache(maxsize=512)
def _transition(p: StageParameters, mode: str, step_s: float) -> NDArray[np.float64]:
    """State after `step_s` from state before: exponential of the linear system of one mode."""
    a = np.zeros((8, 8))
    c = p.heat_capacity_j_per_k
    a[_T, _T] = -p.cooling_w_per_k / c
    a[_T, _EDDY] = 1 / c
    a[_T, _ONE] = p.cooling_w_per_k * p.base_k / c
    if mode == "regulate":
        kp = 2 * c / p.response_s - p.cooling_w_per_k
        a[_T, _T] -= kp / c
        a[_T, _ONE] += kp * p.base_k / c
        a[_T, _J] = 1 / p.response_s**2
        a[_J, _SET] = 1.0
        a[_J, _T] = -1.0
    elif mode == "high":
        a[_T, _ONE] += p.heater_max_w / c
    for lagging, lag_s in ((_SAMPLE, p.sample_lag_s), (_THERMOMETER, p.thermometer_lag_s)):
        rate = 1 / max(lag_s, _LAG_MIN_S)
        a[lagging, lagging] = -rate
        a[lagging, _T] = rate
    a[_SET, _SET_RATE] = 1.0
    result: NDArray[np.float64] = np.asarray(expm(a * step_s), dtype=np.float64)
    return result
