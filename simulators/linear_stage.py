"""A stage of constant coefficients under its default loop, in closed form.

C dT/dt = P_heater + P_eddy - G (T - T_base). The loop integrates the set-point's error and acts
proportionally on the temperature alone, with gains that make the closed loop a critically damped
second-order lag, T/T_set = 1 / (1 + s t_r)^2. Everything between two events is linear, so a step of
any length is one multiplication by a matrix exponential; heater limits are events that are located.
"""

import math
from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from simulators.stage_parameters import LAG_MIN_S, Gains, StageParameters, StageState

_T, _J, _SAMPLE, _THERMOMETER, _SET, _SET_RATE, _EDDY, _ONE = range(8)
_EVENT_S = 1e-3


class _Constants(NamedTuple):
    """All that a transition depends on, quick to look up."""

    heat_capacity_j_per_k: float
    cooling_w_per_k: float
    base_k: float
    response_s: float
    sample_lag_s: float
    thermometer_lag_s: float


class LinearStage:
    """State of stage, sample, thermometer, set-point and heater, moved by matrix exponentials."""

    def __init__(self, parameters: StageParameters, state: StageState, limit_w: float) -> None:
        p = parameters
        self.parameters = p
        self._constants = _Constants(
            p.heat_capacity_j_per_k,
            p.cooling_w_per_k,
            p.cold_k,
            p.response_s,
            max(p.sample_lag_s, LAG_MIN_S),
            max(p.thermometer_lag_s, LAG_MIN_S),
        )
        self._base_k = p.cold_k
        self._kp = 2 * p.heat_capacity_j_per_k / p.response_s - p.cooling_w_per_k
        self._ki = p.heat_capacity_j_per_k / p.response_s**2
        self._limit_w = limit_w
        self._target_k = state.setpoint_k
        self._z = np.array(
            [
                state.stage_k, 0, state.sample_k, state.thermometer_k,
                state.setpoint_k, 0, 0, 1.0,
            ]
        )  # fmt: skip
        self._mode = "regulate" if state.heater_on else "off"
        if state.heater_on:
            self._hold(state.heater_w)

    # -- orders ----------------------------------------------------------------------------

    def set_heater(self, on: bool) -> None:
        """Switch the loop on, from zero power, or the heater off."""
        if on and self._mode == "off":
            self._mode = "low"
        elif not on:
            self._mode = "off"

    def set_limit(self, limit_w: float) -> None:
        """Limit the heater; a power beyond it falls at once."""
        if self._mode == "high":
            self._mode = "regulate"
        self._limit_w = limit_w
        if self._mode == "regulate" and self._demand_w(self._z) > limit_w:
            self._mode = "high"
            self._hold(limit_w)

    def aim(self, target_k: float, rate_k_per_s: float) -> None:
        """End and rate of the set-point's ramp; a rate of 0 is at once."""
        self._target_k = target_k
        if rate_k_per_s == 0.0:
            self._z[_SET] = target_k
        difference = target_k - float(self._z[_SET])
        self._z[_SET_RATE] = math.copysign(rate_k_per_s, difference)
        if difference == 0.0:
            self._z[_SET_RATE] = 0.0

    # -- what can be seen ------------------------------------------------------------------

    def state(self) -> StageState:
        """All of it, to go on in another way."""
        z = self._z
        return StageState(
            float(z[_T]),
            float(z[_SAMPLE]),
            float(z[_THERMOMETER]),
            self.heater_w,
            self._mode != "off",
            float(z[_SET]),
        )

    def tuned(self) -> Gains:
        """Gains of the loop."""
        return Gains(self._kp, self._ki)

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
        return float(self._z[_T] - self._z[_SAMPLE]) / self._constants.sample_lag_s

    @property
    def ramping(self) -> bool:
        """Whether the set-point in force is on its way."""
        return bool(self._z[_SET_RATE] != 0.0)

    @property
    def heater_w(self) -> float:
        """Heater power."""
        if self._mode == "high":
            return self._limit_w
        return self._demand_w(self._z) if self._mode == "regulate" else 0.0

    def _demand_w(self, z: NDArray[np.float64]) -> float:
        return self._ki * float(z[_J]) - self._kp * (float(z[_T]) - self._base_k)

    def _hold(self, heater_w: float) -> None:
        """Set the integral to what gives this power now."""
        self._z[_J] = (heater_w + self._kp * (float(self._z[_T]) - self._base_k)) / self._ki

    # -- time ------------------------------------------------------------------------------

    def horizon_s(self) -> float:
        """Time until the set-point's ramp ends."""
        rate = float(self._z[_SET_RATE])
        return (self._target_k - float(self._z[_SET])) / rate if rate else math.inf

    def advance(self, duration_s: float, field_rate_t_per_s: float, field_t: float) -> None:
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
            self._z[_SET] = self._target_k
            self._z[_SET_RATE] = 0.0

    def _propagate(self, step_s: float) -> NDArray[np.float64]:
        return _transition(self._constants, self._mode, self._limit_w, step_s)

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
            return not -1e-12 <= self._demand_w(z) <= self._limit_w * (1 + 1e-12)
        heater_w = self._limit_w if self._mode == "high" else 0.0
        flow_w = heater_w + float(z[_EDDY]) - p.cooling_w_per_k * (float(z[_T]) - self._base_k)
        demand_slope = (
            self._ki * float(z[_SET] - z[_T]) - self._kp * flow_w / p.heat_capacity_j_per_k
        )
        return demand_slope < 0 if self._mode == "high" else demand_slope > 0

    def _turn(self) -> None:
        if self._mode == "regulate" and self._leaves(self._z):
            self._mode = "high" if self._demand_w(self._z) > self._limit_w else "low"
        elif self._mode in {"high", "low"}:
            self._hold(self._limit_w if self._mode == "high" else 0.0)
            if self._leaves(self._z):
                self._mode = "regulate"


@lru_cache(maxsize=512)
def _transition(p: _Constants, mode: str, limit_w: float, step_s: float) -> NDArray[np.float64]:
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
        a[_T, _ONE] += limit_w / c
    for lagging, lag_s in ((_SAMPLE, p.sample_lag_s), (_THERMOMETER, p.thermometer_lag_s)):
        rate = 1 / lag_s
        a[lagging, lagging] = -rate
        a[lagging, _T] = rate
    a[_SET, _SET_RATE] = 1.0
    result: NDArray[np.float64] = np.asarray(expm(a * step_s), dtype=np.float64)
    return result
