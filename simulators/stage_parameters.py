"""What a sample stage is made of, and the state that passes between its two ways of moving."""

import itertools
from dataclasses import dataclass
from typing import NamedTuple

PERIODS_PER_RESPONSE_MIN = 4.0
LAG_MIN_S = 1e-3
"""A shorter lag of sample or thermometer counts as this."""


class StageState(NamedTuple):
    """Temperatures, heater power and set-point in force at one instant."""

    stage_k: float
    sample_k: float
    thermometer_k: float
    heater_w: float
    heater_on: bool
    setpoint_k: float


@dataclass(frozen=True, slots=True)
class Gains:
    """The loop's gains, W/K, W/(K s), W s/K.

    Power = integral of ``integral`` x error - ``proportional`` x T - ``derivative`` x dT/dt, of the
    temperature that the loop sees, and within the heater's range.
    """

    proportional_w_per_k: float
    integral_w_per_k_s: float
    derivative_w_s_per_k: float = 0.0


@dataclass(frozen=True, slots=True)
class StageParameters:
    """A heated sample stage and its controller. What is 0 or empty by default is left out.

    Attributes
    ----------
    base_k : float
        Temperature with the heater off; also the lowest set-point.
    maximum_k : float
        Highest set-point.
    start_k : float
        Temperature at power on.
    heat_capacity_j_per_k, heat_capacity_linear_j_per_k2, heat_capacity_cubic_j_per_k4 : float
        C(T) = this + gamma T + beta T^3: addenda, electrons, lattice.
    cooling_w_per_k, cooling_exponent, cooling_reference_k : float
        Conductance to the cold end, G(T) = cooling (T / reference)^n; heat flows as the integral
        of G from the base to T. n = 0 is a constant, 1 a metal, 3 a dielectric or a boundary.
    heater_max_w : float
        The heater gives 0 to this.
    heater_ranges_w : tuple of float
        Ranges of the heater, rising; the chosen one limits the power. Empty: one, heater_max_w.
    response_s : float
        t_r of the closed loop; with constant C and G less than 2 C / G.
    loop_on_thermometer : bool
        The loop sees the thermometer with its lag, and not the stage itself.
    loop_period_s : float
        Period of the digital loop, where there is one.
    eddy_w_s2_per_t2 : float
        Eddy heating, P = this x (dB/dt)^2 (Ekin 2006).
    curie_j_k_per_t2 : float
        c of a paramagnet on the stage: moment c B / T, magnetic heat capacity c B^2 / T^2.
    sample_lag_s, thermometer_lag_s : float
        First-order lags of sample and thermometer behind the stage.
    sample_conductance_w_per_k : float
        From sample to stage, for the heat of the excitation; 0: the excitation does not heat.
    noise_k : float
        Standard deviation of one temperature reading.
    thermometer_error_per_t2 : float
        a in shown = true x (1 + a B^2).
    thermometer_error : tuple of (field_t, relative)
        The same as a table: even in the field, 0 at zero field, straight between entries, and
        beyond the last one as there.
    bath_pressure_pa : float
        The base is a helium-4 bath pumped to this vapour pressure, and `base_k` does not count.
    charge_j, charge_leak_w : float
        Heat that a one-shot cold end takes before it is spent, and what it takes without a load.
    spent_base_k, recharge_s : float
        Base when the charge is spent and while it is renewed, and how long that takes.
    """

    base_k: float = 0.3
    maximum_k: float = 30.0
    start_k: float = 0.3
    heat_capacity_j_per_k: float = 0.05
    heat_capacity_linear_j_per_k2: float = 0.0
    heat_capacity_cubic_j_per_k4: float = 0.0
    cooling_w_per_k: float = 0.002
    cooling_exponent: float = 0.0
    cooling_reference_k: float = 1.0
    heater_max_w: float = 0.2
    heater_ranges_w: tuple[float, ...] = ()
    response_s: float = 4.0
    loop_on_thermometer: bool = False
    loop_period_s: float = 0.1
    eddy_w_s2_per_t2: float = 20.0
    curie_j_k_per_t2: float = 0.0
    sample_lag_s: float = 1.0
    thermometer_lag_s: float = 0.3
    sample_conductance_w_per_k: float = 0.0
    noise_k: float = 2e-5
    thermometer_error_per_t2: float = 0.0
    thermometer_error: tuple[tuple[float, float], ...] = ()
    bath_pressure_pa: float = 0.0
    charge_j: float = 0.0
    charge_leak_w: float = 0.0
    spent_base_k: float = 1.4
    recharge_s: float = 1800.0

    def __post_init__(self) -> None:
        cold_k = self.cold_k  # refuses a pressure that is off the scale
        self._check_capacity()
        self._check_response()
        self._check_tables()
        if self.charge_j and self.spent_base_k <= cold_k:
            raise ValueError(
                f"spent_base_k of the stage is {self.spent_base_k:g} K; "
                f"allowed is above its base of {self.cold_k:g} K"
            )

    def _check_capacity(self) -> None:
        parts = (
            self.heat_capacity_j_per_k,
            self.heat_capacity_linear_j_per_k2,
            self.heat_capacity_cubic_j_per_k4,
        )
        if min(parts) < 0 or max(parts) <= 0:
            raise ValueError(
                f"heat capacity of the stage is {parts[0]:g} J/K + {parts[1]:g} J/K^2 T + "
                f"{parts[2]:g} J/K^4 T^3; allowed is no negative part and one above 0"
            )

    def _check_response(self) -> None:
        if self.constant:
            slowest = 2 * self.heat_capacity_j_per_k / self.cooling_w_per_k
            if not 0 < self.response_s < slowest:
                raise ValueError(
                    f"response_s of the stage is {self.response_s} s; "
                    f"allowed is 0 to {slowest} s, which is 2 C / G"
                )
        elif self.response_s < PERIODS_PER_RESPONSE_MIN * self.loop_period_s:
            raise ValueError(
                f"response_s of the stage is {self.response_s} s; allowed is "
                f"{PERIODS_PER_RESPONSE_MIN * self.loop_period_s:g} s or more, "
                f"{PERIODS_PER_RESPONSE_MIN:g} periods of the loop"
            )

    def _check_tables(self) -> None:
        ranges = (0.0, *self.heater_ranges_w)
        if any(low >= high for low, high in itertools.pairwise(ranges)):
            raise ValueError(f"heater_ranges_w of the stage is {ranges[1:]}; allowed is rising")
        if ranges[-1] > self.heater_max_w:
            raise ValueError(
                f"heater_ranges_w of the stage goes to {ranges[-1]:g} W; "
                f"allowed is up to heater_max_w, {self.heater_max_w:g} W"
            )
        fields = (0.0, *(field_t for field_t, _ in self.thermometer_error))
        if any(low >= high for low, high in itertools.pairwise(fields)):
            raise ValueError(f"thermometer_error of the stage is at {fields[1:]} T; must rise")
        errors = [error for _, error in self.thermometer_error]
        if errors and self.thermometer_error_per_t2:
            raise ValueError("thermometer_error of the stage is given as a table and per T^2")
        if any(error <= -1 for error in errors):
            raise ValueError(
                f"thermometer_error of the stage is {min(errors):g}; allowed is above -1"
            )
        if self.thermometer_error_per_t2 < -4e-4:
            raise ValueError(
                f"thermometer_error_per_t2 of the stage is {self.thermometer_error_per_t2:g}; "
                "allowed is -4e-4 or more, which shows 0 K at 50 T"
            )

    @property
    def cold_k(self) -> float:
        """Base while the cold end is cold: of the pumped bath, if there is one."""
        if not self.bath_pressure_pa:
            return self.base_k
        from simulators.vapour_pressure import bath_k  # slow to import, and needed here alone

        return bath_k(self.bath_pressure_pa)

    @property
    def ranges_w(self) -> tuple[float, ...]:
        """Ranges of the heater."""
        return self.heater_ranges_w or (self.heater_max_w,)

    @property
    def constant(self) -> bool:
        """Nothing depends on temperature or field, so that the stage moves in closed form."""
        return not (
            self.heat_capacity_linear_j_per_k2
            or self.heat_capacity_cubic_j_per_k4
            or self.cooling_exponent
            or self.loop_on_thermometer
            or self.curie_j_k_per_t2
            or self.sample_conductance_w_per_k
            or self.thermometer_error_per_t2
            or self.thermometer_error
            or self.charge_j
        )
