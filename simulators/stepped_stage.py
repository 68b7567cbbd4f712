"""A stage whose coefficients depend on temperature and field, moved on a fixed grid of times.

    C(T, B) dT/dt = P_heater + kappa (dB/dt)^2 + P_excitation + (c B / T) dB/dt - Q(T),
    C = C0 + gamma T + beta T^3 + c B^2 / T^2,   Q = integral of G0 (T / T0)^n from base to T.

Heat capacities and conductances: Pobell, Matter and Methods at Low Temperatures (2007); Ekin,
Experimental Techniques for Low-Temperature Measurements (2006). The Curie terms are -T (dM/dT)_B dB
and T (dS/dT)_B of M = c B / T (Pobell, chapter on adiabatic demagnetisation; from memory); both
together make T / B constant where nothing else has heat capacity and nothing flows.

The loop is digital: it looks and sets the heater once a period, and between two of its looks all
heater powers are constant. The state is kept at those times, and at orders and changes of the
coil's rate; what is seen in between is computed from there and not kept, so that looking changes
nothing. Steps: exponential Euler on the linearised equation (second order, exact for constants,
stable for any stiffness), halved until the temperature changes by less than a twentieth.
"""

import math
from bisect import bisect_left
from collections.abc import Callable

from simulators.charge import Charge
from simulators.stage_parameters import LAG_MIN_S, Gains, StageParameters, StageState

_CHANGE_MAX = 0.05
_SOON_S = 1e-9
_JUMP_T = 1e-6


class SteppedStage:
    """State of stage, sample, thermometer, set-point and heater, moved on the loop's grid.

    Parameters
    ----------
    parameters : StageParameters
    state : StageState
        Where it begins; the loop's first period begins then too.
    limit_w : float
        Range of the heater.
    charge : Charge
        The cold end.
    excitation_w : callable
        Power in the sample at a field, asked for once a period.
    """

    def __init__(
        self,
        parameters: StageParameters,
        state: StageState,
        limit_w: float,
        charge: Charge,
        excitation_w: Callable[[float], float],
    ) -> None:
        p = parameters
        self.parameters = p
        self.gains: Gains | None = None
        self._charge = charge
        self._excitation = excitation_w
        self._period_s = p.loop_period_s
        self._sample_lag_s = max(p.sample_lag_s, LAG_MIN_S)
        self._thermometer_lag_s = max(p.thermometer_lag_s, LAG_MIN_S)
        self._stays = (
            math.exp(-self._period_s / self._sample_lag_s),
            math.exp(-self._period_s / self._thermometer_lag_s),
        )
        self._coefficients = (
            p.heat_capacity_j_per_k,
            p.heat_capacity_linear_j_per_k2,
            p.heat_capacity_cubic_j_per_k4,
            p.curie_j_k_per_t2,
        )
        self._eddy = p.eddy_w_s2_per_t2
        self._limited = p.charge_j > 0.0
        self._power_n = p.cooling_exponent + 1.0
        self._flow_scale = p.cooling_w_per_k / (
            self._power_n * p.cooling_reference_k**p.cooling_exponent
        )
        self._limit_w = limit_w
        self._heater_on = state.heater_on
        self._heater_w = state.heater_w
        self._setpoint_k = self._target_k = state.setpoint_k
        self._setpoint_rate_k_per_s = 0.0
        # Kept: temperatures of stage, sample, thermometer at `_phase_s` of the loop's period.
        self._kept = self._now = (state.stage_k, state.sample_k, state.thermometer_k)
        self._phase_s = 0.0
        self._since_s = 0.0
        self._ramp_from_s = 0.0
        self._field_t = 0.0
        self._rate_t_per_s = 0.0
        self._drawn_j = 0.0
        self._excitation_w = 0.0
        self._rise_k = 0.0
        self._base_flow = 0.0
        self._see_base()
        self._seen_k: tuple[float, float] | None = None

    # -- orders ----------------------------------------------------------------------------

    def set_heater(self, on: bool) -> None:
        """Switch the loop on, from zero power, or the heater off at once."""
        if not on:
            self._keep()
            self._heater_w = 0.0
        self._heater_on = on

    def set_limit(self, limit_w: float) -> None:
        """Limit the heater; a power beyond it falls at once."""
        self._limit_w = limit_w
        if self._heater_w > limit_w:
            self._keep()
            self._heater_w = limit_w

    def aim(self, target_k: float, rate_k_per_s: float) -> None:
        """End and rate of the set-point's ramp; a rate of 0 is at once."""
        self._move_setpoint(self._phase_s + self._since_s)
        self._target_k = target_k
        self._setpoint_rate_k_per_s = rate_k_per_s
        if rate_k_per_s == 0.0:
            self._setpoint_k = target_k

    # -- what can be seen ------------------------------------------------------------------

    def state(self) -> StageState:
        """All of it, to go on in another way."""
        return StageState(*self._now, self.heater_w, self._heater_on, self._setpoint_k)

    @property
    def stage_k(self) -> float:
        """Temperature of the stage."""
        return self._now[0]

    @property
    def sample_k(self) -> float:
        """Temperature of the sample."""
        return self._now[1]

    @property
    def thermometer_k(self) -> float:
        """What the thermometer shows, without its noise."""
        return self._now[2] * self._shown(self._field_t + self._rate_t_per_s * self._since_s)

    @property
    def sample_slope_k_per_s(self) -> float:
        """Rate of change of the sample's temperature."""
        return (self._now[0] + self._rise_k - self._now[1]) / self._sample_lag_s

    @property
    def ramping(self) -> bool:
        """Whether the set-point in force is on its way."""
        return self._setpoint_k != self._target_k

    @property
    def heater_w(self) -> float:
        """Heater power."""
        return self._heater_w

    # -- time ------------------------------------------------------------------------------

    def horizon_s(self) -> float:
        """Time until somebody outside must act: never."""
        return math.inf

    def advance(self, duration_s: float, field_rate_t_per_s: float, field_t: float) -> None:
        """Move by a time.

        Parameters
        ----------
        duration_s : float
            Any length.
        field_rate_t_per_s, field_t : float
            Rate of the coil's field during it, and the field at its start.
        """
        expected_t = self._field_t + self._rate_t_per_s * self._since_s
        if field_rate_t_per_s != self._rate_t_per_s or abs(field_t - expected_t) > _JUMP_T:
            self._keep()
            self._field_t, self._rate_t_per_s = field_t, field_rate_t_per_s
        gone = 0.0
        while True:
            to_tick = self._period_s - self._phase_s - self._since_s
            if duration_s - gone < to_tick - _SOON_S:
                break
            gone += to_tick
            self._now = self._moved(self._period_s - self._phase_s, keep=True)
            self._kept, self._phase_s, self._since_s = self._now, 0.0, 0.0
            self._field_t = field_t + field_rate_t_per_s * gone
            self._tick()
        if duration_s - gone > _SOON_S:
            self._since_s += duration_s - gone
            self._now = self._moved(self._since_s, keep=False)

    def _keep(self) -> None:
        """Let what is seen now be the state from which it goes on."""
        if self._since_s:
            self._kept = self._now = self._moved(self._since_s, keep=True)
            self._field_t += self._rate_t_per_s * self._since_s
            self._phase_s += self._since_s
            self._since_s = 0.0

    # -- the loop --------------------------------------------------------------------------

    def _tick(self) -> None:
        """One look of the loop, at the end of a period."""
        p = self.parameters
        self._move_setpoint(self._period_s)
        self._ramp_from_s = 0.0
        if p.charge_j:
            self._charge.take(self._drawn_j, self._period_s)
            self._drawn_j = 0.0
            self._see_base()
        if p.sample_conductance_w_per_k:
            self._excitation_w = self._excitation(self._field_t)
            self._rise_k = self._excitation_w / p.sample_conductance_w_per_k
        stage_k, _, thermometer_k = self._kept
        seen_k = thermometer_k if p.loop_on_thermometer else stage_k
        seen_k *= self._shown(self._field_t)
        one_k, two_k = self._seen_k or (seen_k, seen_k)
        if self._heater_on:
            gains = self.gains or self.tuned(stage_k)
            power_w = (
                self._heater_w
                + gains.integral_w_per_k_s * self._period_s * (self._setpoint_k - seen_k)
                - gains.proportional_w_per_k * (seen_k - one_k)
                - gains.derivative_w_s_per_k * (seen_k - 2 * one_k + two_k) / self._period_s
            )
            self._heater_w = min(max(power_w, 0.0), self._limit_w)
        self._seen_k = (seen_k, one_k)

    def tuned(self, stage_k: float) -> Gains:
        """Gains that make the loop critically damped with t_r at this temperature and field.

        Where the stage itself is faster than t_r / 2 it has nothing to damp: the integral alone,
        G / (2 t_r).
        """
        p = self.parameters
        c0, gamma, beta, curie = self._coefficients
        heat_capacity = c0 + (gamma + beta * stage_k * stage_k) * stage_k
        heat_capacity += curie * (self._field_t / stage_k) ** 2
        conductance = self._flow_scale * self._power_n * stage_k**p.cooling_exponent
        proportional = 2 * heat_capacity / p.response_s - conductance
        if proportional < 0.0:
            return Gains(0.0, conductance / (2 * p.response_s))
        return Gains(proportional, heat_capacity / p.response_s**2)

    def _move_setpoint(self, until_s: float) -> None:
        """Bring the set-point to a time of this period."""
        step_k = self._setpoint_rate_k_per_s * (until_s - self._ramp_from_s)
        self._ramp_from_s = until_s
        left_k = self._target_k - self._setpoint_k
        if abs(left_k) <= step_k * (1 + 1e-12):
            self._setpoint_k = self._target_k
        else:
            self._setpoint_k += math.copysign(step_k, left_k)

    def _shown(self, field_t: float) -> float:
        """What the thermometer shows over the truth."""
        p = self.parameters
        if p.thermometer_error_per_t2:
            return 1.0 + p.thermometer_error_per_t2 * field_t * field_t
        if not p.thermometer_error:
            return 1.0
        field_t = abs(field_t)
        at = bisect_left(p.thermometer_error, (field_t,))
        if at == len(p.thermometer_error):
            return 1.0 + p.thermometer_error[-1][1]
        high_t, high = p.thermometer_error[at]
        low_t, low = p.thermometer_error[at - 1] if at else (0.0, 0.0)
        return 1.0 + low + (high - low) * (field_t - low_t) / (high_t - low_t)

    # -- heat ------------------------------------------------------------------------------

    def _see_base(self) -> None:
        self._base_flow = self._flow_scale * self._charge.base_k**self._power_n

    def _moved(self, span_s: float, keep: bool) -> tuple[float, float, float]:
        """Temperatures a time after the kept ones; `keep` counts the heat that has flowed."""
        stage_k, sample_k, thermometer_k = self._kept
        field_t, rate, n = self._field_t, self._rate_t_per_s, self._power_n
        c0, gamma, beta, curie = self._coefficients
        flow_scale, base_flow, rise_k = self._flow_scale, self._base_flow, self._rise_k
        power_w = self._heater_w + self._eddy * rate * rate + self._excitation_w
        left = step = span_s
        while left > 0.0:
            gross_w = flow_scale * stage_k**n
            flow_w = gross_w - base_flow
            square = stage_k * stage_k
            c, c_slope = c0 + (gamma + beta * square) * stage_k, gamma + 3.0 * beta * square
            minus_w_per_k, magnetic_w = n * gross_w / stage_k, 0.0
            while True:
                if curie:
                    middle_t = field_t + 0.5 * rate * step
                    magnetic_c = curie * middle_t * middle_t / square
                    magnetic_w = curie * middle_t * rate / stage_k
                    velocity = (power_w + magnetic_w - flow_w) / (c + magnetic_c)
                    slope = c_slope - 2.0 * magnetic_c / stage_k
                    x = minus_w_per_k + magnetic_w / stage_k + velocity * slope
                    x *= -step / (c + magnetic_c)
                else:
                    velocity = (power_w - flow_w) / c
                    x = -(minus_w_per_k + velocity * c_slope) / c * step
                if x < 1.0:
                    rise = velocity * step
                    if abs(x) > 1e-9:
                        rise *= math.expm1(x) / x
                    if abs(rise) <= _CHANGE_MAX * stage_k:
                        break
                step *= 0.5
            before_k, stage_k = stage_k, stage_k + rise
            if keep and self._limited:
                after_w = flow_scale * stage_k**n - base_flow
                self._drawn_j += 0.5 * (flow_w + after_w) * step
            slope = rise / step
            if step == self._period_s:
                sample_stays, thermometer_stays = self._stays
            else:
                sample_stays = math.exp(-step / self._sample_lag_s)
                thermometer_stays = math.exp(-step / self._thermometer_lag_s)
            # First-order lags, exactly, behind what rises evenly.
            behind = before_k - slope * self._sample_lag_s + rise_k
            sample_k = behind + rise + (sample_k - behind) * sample_stays
            behind = before_k - slope * self._thermometer_lag_s
            thermometer_k = behind + rise + (thermometer_k - behind) * thermometer_stays
            field_t += rate * step
            left -= step
            step = min(left, 2.0 * step)
        return stage_k, sample_k, thermometer_k
