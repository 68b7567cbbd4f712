"""The stage with coefficients that depend on temperature and field, against closed forms."""

import math
import random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simulators.cryostat import Gains, Stage, StageParameters


def settled(stage: Stage, temperature_k: float, field_t: float = 0.0) -> None:
    stage.set_heater(True)
    stage.set_setpoint(temperature_k)
    stage.advance(1000.0, 0.0, field_t)


def test_metal_stage_on_a_metal_link_relaxes_in_the_square_of_temperature() -> None:
    """gamma T dT/dt = -G0/(2 T0) (T^2 - Tb^2): exact for C = gamma T, G ~ T (calculus)."""
    stage = Stage(
        StageParameters(
            start_k=10.0, heat_capacity_j_per_k=0.0, heat_capacity_linear_j_per_k2=0.01,
            cooling_w_per_k=0.004, cooling_exponent=1.0, cooling_reference_k=2.0,
        )
    )  # fmt: skip
    for half_seconds in range(1, 200):
        stage.advance(0.5, 0.0)
        square = 0.09 + (100.0 - 0.09) * math.exp(-0.2 * 0.5 * half_seconds)
        assert stage.stage_k == pytest.approx(math.sqrt(square), rel=1e-5)


def test_lattice_stage_on_a_boundary_relaxes_in_the_fourth_power() -> None:
    """beta T^3 dT/dt = -G0/(4 T0^3) (T^4 - Tb^4): exact for C = beta T^3, G ~ T^3 (calculus)."""
    stage = Stage(
        StageParameters(
            start_k=10.0, heat_capacity_j_per_k=0.0, heat_capacity_cubic_j_per_k4=1e-3,
            cooling_w_per_k=2e-4, cooling_exponent=3.0,
        )
    )  # fmt: skip
    for half_seconds in range(1, 200):
        stage.advance(0.5, 0.0)
        fourth = 0.3**4 + (1e4 - 0.3**4) * math.exp(-0.2 * 0.5 * half_seconds)
        assert stage.stage_k == pytest.approx(fourth**0.25, rel=1e-5)


def test_constant_stage_on_the_grid_cools_exactly_as_newton_has_it() -> None:
    """exp(-t G / C), also in steps that do not fit the grid."""
    stage = Stage(StageParameters(start_k=1.3, loop_on_thermometer=True))
    for _ in range(97):
        stage.advance(25.0 / 97, 0.0)
    assert stage.stage_k == pytest.approx(0.3 + math.exp(-1.0), rel=1e-12)


@pytest.mark.parametrize("exponent", [0.0, 1.0, 3.0])
def test_steady_heater_power_is_the_integral_of_the_conductance(exponent: float) -> None:
    """Q = integral of G0 (T/T0)^n dT from base to T (Fourier's law; Ekin 2006)."""
    stage = Stage(
        StageParameters(
            cooling_exponent=exponent, heat_capacity_linear_j_per_k2=0.01, heater_max_w=10.0
        )
    )
    settled(stage, 4.0)
    wanted = 0.002 / (exponent + 1) * (4.0 ** (exponent + 1) - 0.3 ** (exponent + 1))
    assert stage.stage_k == pytest.approx(4.0, abs=1e-8)
    assert stage.heater_w == pytest.approx(wanted, rel=1e-8)


def test_ideal_paramagnet_cools_with_its_field_when_nothing_flows() -> None:
    """Adiabatic demagnetisation: T / B constant (textbook; Pobell, from memory)."""
    stage = Stage(
        StageParameters(
            base_k=1.0, start_k=1.0, heat_capacity_j_per_k=1e-12, cooling_w_per_k=1e-15,
            curie_j_k_per_t2=0.1, eddy_w_s2_per_t2=0.0,
        )
    )  # fmt: skip
    for step in range(11):
        stage.advance(50.0, -0.01, 6.0 - 0.5 * step)
        field_t = 5.5 - 0.5 * step
        assert stage.stage_k == pytest.approx(field_t / 6.0, rel=1e-6)
    for step in range(11):
        stage.advance(50.0, 0.01, 0.5 + 0.5 * step)
    assert stage.stage_k == pytest.approx(1.0, rel=1e-6)


def test_entropy_is_kept_with_a_metal_beside_the_paramagnet() -> None:
    """S = gamma T - c B^2 / (2 T^2) is constant where no heat flows, down to zero field."""
    gamma, c = 0.02, 0.001
    stage = Stage(
        StageParameters(
            base_k=1.0, start_k=1.0, heat_capacity_j_per_k=0.0, heat_capacity_linear_j_per_k2=gamma,
            cooling_w_per_k=1e-15, curie_j_k_per_t2=c, eddy_w_s2_per_t2=0.0,
        )
    )  # fmt: skip
    for _ in range(7):
        stage.advance(30.0, -0.01, 6.0 - _ * 0.3)
    field_t = 3.9
    entropy = gamma * stage.stage_k - c * field_t**2 / (2 * stage.stage_k**2)
    assert stage.stage_k < 0.8
    assert entropy == pytest.approx(gamma - c * 36.0 / 2, abs=1e-7)
    stage.advance(390.0, -0.01, field_t)
    assert stage.stage_k == pytest.approx(1.0 - c * 36.0 / (2 * gamma), rel=1e-4)


@pytest.mark.parametrize("rate_t_per_s", [0.001, -0.001])
def test_heater_takes_up_the_heat_of_magnetising(rate_t_per_s: float) -> None:
    """At constant T the heat is (c B / T) dB: warms when magnetising, cools the other way."""
    stage = Stage(StageParameters(curie_j_k_per_t2=0.1, eddy_w_s2_per_t2=0.0))
    settled(stage, 4.0, 5.0)
    still_w = stage.heater_w
    stage.advance(200.0, rate_t_per_s, 5.0)
    field_t = 5.0 + 200.0 * rate_t_per_s
    assert stage.stage_k == pytest.approx(4.0, abs=1e-3)
    assert still_w - stage.heater_w == pytest.approx(0.1 * field_t / 4.0 * rate_t_per_s, rel=5e-3)


def _loop(damping: float, derivative: float) -> Stage:
    """I-P loop of natural frequency 0.1 rad/s, by hand."""
    c = 0.05 + derivative
    stage = Stage(StageParameters(start_k=2.0, heater_max_w=1.0, loop_period_s=0.05))
    stage.set_gains(Gains(2 * damping * 0.1 * c - 0.002, 0.01 * c, derivative))
    settled(stage, 2.0)
    stage.set_setpoint(2.5)
    return stage


@pytest.mark.parametrize("derivative", [0.0, 0.03])
@pytest.mark.parametrize("damping", [0.3, 0.6])
def test_gains_by_hand_overshoot_as_the_damping_says(damping: float, derivative: float) -> None:
    """Second-order step: overshoot exp(-pi zeta / sqrt(1 - zeta^2)), textbook.

    The derivative of T acts as heat capacity, C + D.
    """
    stage = _loop(damping, derivative)
    highest = 0.0
    for _ in range(240):
        stage.advance(0.5, 0.0)
        highest = max(highest, stage.stage_k)
    wanted = math.exp(-math.pi * damping / math.sqrt(1 - damping**2))
    assert (highest - 2.5) / 0.5 == pytest.approx(wanted, abs=0.006)


def test_loop_hunts_when_the_thermometer_is_slow_and_the_gain_high() -> None:
    """C tau s^3 + (C + G tau) s^2 + (G + P) s + I, tau in the thermometer: stable (Routh) below
    I C tau = (C + G tau)(G + P), hunting above it.
    """
    c, g, tau, p = 0.05, 0.002, 10.0, 0.02
    limit = (c + g * tau) * (g + p) / (c * tau)
    swing = []
    for share in (0.7, 1.4):
        stage = Stage(
            StageParameters(
                start_k=2.0, thermometer_lag_s=tau, loop_on_thermometer=True, heater_max_w=1.0,
            )
        )  # fmt: skip
        stage.set_gains(Gains(p, share * limit))
        settled(stage, 2.0)
        seen = []
        for _ in range(200):
            stage.advance(1.0, 0.0)
            seen.append(stage.stage_k)
        swing.append(max(seen) - min(seen))
    assert swing[0] < 1e-6
    assert swing[1] > 0.1


def test_default_gains_are_critical_damping_or_the_integral_alone_on_a_fast_stage() -> None:
    """I t_r^2 = C, P + G = 2 C / t_r; C s^2 + (G + P) s + I never has complex roots."""
    for c, p, i in ((0.05, 2 * 0.05 / 4 - 0.002, 0.05 / 16), (1e-4, 0.0, 0.002 / 8)):
        stage = Stage(StageParameters(heat_capacity_j_per_k=c, loop_on_thermometer=True))
        assert stage.gains == Gains(pytest.approx(p), pytest.approx(i))  # type: ignore[arg-type]
        assert (0.002 + p) ** 2 >= 4 * c * i * (1 - 1e-12)


def test_charge_takes_all_the_heat_of_a_stage_that_cools() -> None:
    """Energy: C (T - base) once cold, with C = C0 + gamma T, and leak x time."""
    stage = Stage(
        StageParameters(
            start_k=4.0, heat_capacity_linear_j_per_k2=0.01, charge_j=10.0, charge_leak_w=1e-3
        )
    )
    stage.advance(1000.0, 0.0)
    wanted = 0.05 * 3.7 + 0.005 * (16.0 - 0.09) + 1.0
    assert 10.0 - stage.charge.left_j == pytest.approx(wanted, rel=2e-6)


@pytest.mark.parametrize("phase_s", [0.03, 0.08])
def test_ramp_begins_when_it_is_ordered_and_not_at_the_loop_s_next_look(phase_s: float) -> None:
    seen = []
    for wait_s in (0.0, phase_s):
        stage = Stage(StageParameters(cooling_exponent=1.0, heater_max_w=1.0))
        settled(stage, 2.0)
        stage.advance(wait_s, 0.0)
        stage.set_rate(0.01)
        stage.set_setpoint(5.0)
        stage.advance(100.0, 0.0)
        seen.append(stage.stage_k)
    assert seen[1] == pytest.approx(seen[0], abs=2e-6)


ORDERS = st.lists(
    st.tuples(
        st.sampled_from(["heat", "off", "set", "ramp", "sweep", "range"]),
        st.floats(0.0, 1.0),
        st.floats(0.05, 5.0),
    ),
    min_size=3,
    max_size=7,
)


def obey(stage: Stage, order: str, value: float) -> float | None:
    """Carry an order out; the new rate of the field, if that is what it is."""
    if order == "heat":
        stage.set_heater(True)
    elif order == "off":
        stage.set_heater(False)
    elif order == "set":
        stage.set_setpoint(0.5 + 9.5 * value)
    elif order == "ramp":
        stage.set_rate(0.2 * value if value > 0.3 else 0.0)
    elif order == "range":
        stage.set_heater_limit(0.2 * value)
    elif order == "sweep":
        return 0.04 * (value - 0.5)
    return None


EVERYTHING = StageParameters(
    start_k=3.0, heat_capacity_j_per_k=0.01, heat_capacity_linear_j_per_k2=0.01,
    heat_capacity_cubic_j_per_k4=1e-4, cooling_exponent=1.0, eddy_w_s2_per_t2=20.0,
    curie_j_k_per_t2=2e-3, heater_ranges_w=(0.002, 0.02, 0.2), sample_conductance_w_per_k=1e-4,
    thermometer_error_per_t2=2e-4,
)  # fmt: skip


@settings(max_examples=15, deadline=None)
@given(ORDERS)
def test_energy_is_balanced_through_any_orders(orders: list[tuple[str, float, float]]) -> None:
    """First law: what flowed in is lattice energy + change of -c B^2/T, + integral of M dB.

    Integrals by trapezoids over 10 ms, apart from the model's own steps.
    """
    p, excitation_w = EVERYTHING, 2e-3
    stage = Stage(p, lambda _: excitation_w)
    field_t, rate = 3.0, 0.0
    stage.advance(0.2, 0.0, field_t)

    def energy_j() -> float:
        t = stage.stage_k
        lattice = p.heat_capacity_j_per_k * t + p.heat_capacity_linear_j_per_k2 * t**2 / 2
        lattice += p.heat_capacity_cubic_j_per_k4 * t**4 / 4
        return lattice - p.curie_j_k_per_t2 * field_t**2 / t

    def rates_w() -> tuple[float, float]:
        t = stage.stage_k
        out = 0.001 * (t**2 - 0.09)
        return p.eddy_w_s2_per_t2 * rate**2 + excitation_w - out, p.curie_j_k_per_t2 * (
            field_t / t
        ) * rate

    before_j, came_j, moved_j = energy_j(), 0.0, 0.0
    for order, value, wait_s in orders:
        changed = obey(stage, order, value)
        rate = rate if changed is None else changed
        steps = max(1, round(wait_s / 0.01))
        for _ in range(steps):
            flow, work = rates_w()
            heater_w = stage.heater_w
            stage.advance(0.01, rate, field_t)
            field_t += 0.01 * rate
            flow_after, work_after = rates_w()
            came_j += 0.01 * (0.5 * (flow + flow_after) + heater_w)
            moved_j += 0.01 * 0.5 * (work + work_after)
    scale_j = max(abs(came_j), 0.01)
    assert energy_j() - before_j + moved_j == pytest.approx(came_j, abs=2e-3 * scale_j)


@settings(max_examples=25, deadline=None)
@given(ORDERS, st.integers(0, 10**6))
def test_looking_changes_nothing(orders: list[tuple[str, float, float]], seed: int) -> None:
    """Seen at random instants, or only at the orders: the same to rounding."""
    rng = random.Random(seed)
    ends = []
    for looks in (False, True):
        stage, field_t, rate = Stage(EVERYTHING, lambda b: 1e-6 * (1 + b)), 3.0, 0.0
        for order, value, wait_s in orders:
            changed = obey(stage, order, value)
            rate = rate if changed is None else changed
            left = wait_s
            while left > 0:
                step = min(left, rng.uniform(0.001, 0.7)) if looks else left
                stage.advance(step, rate, field_t)
                field_t += rate * step
                left -= step
        ends.append((stage.stage_k, stage.sample_k, stage.thermometer_k, stage.heater_w))
    assert ends[0] == pytest.approx(ends[1], rel=1e-9, abs=1e-12)


@settings(max_examples=40, deadline=None)
@given(
    start_k=st.floats(0.02, 30.0),
    gamma=st.floats(1e-7, 1.0),
    beta=st.floats(0.0, 1e-2),
    exponent=st.floats(0.0, 4.0),
    cooling=st.floats(1e-6, 1.0),
    power_w=st.floats(0.0, 10.0),
)
def test_any_stiffness_stays_between_the_base_and_the_steady_state(
    start_k: float, gamma: float, beta: float, exponent: float, cooling: float, power_w: float
) -> None:
    """With constant power T goes one way, from where it is to where power = cooling."""
    base_k = 0.05
    stage = Stage(
        StageParameters(
            base_k=base_k, start_k=start_k, heat_capacity_j_per_k=0.0,
            heat_capacity_linear_j_per_k2=gamma, heat_capacity_cubic_j_per_k4=beta,
            cooling_w_per_k=cooling, cooling_exponent=exponent, eddy_w_s2_per_t2=power_w,
        )
    )  # fmt: skip
    n = exponent + 1
    steady_k = (base_k**n + n * power_w / cooling) ** (1 / n)
    last = start_k
    low, high = min(start_k, steady_k), max(start_k, steady_k)
    for _ in range(20):
        stage.advance(0.5, 1.0)
        assert low * (1 - 1e-3) <= stage.stage_k <= high * (1 + 1e-3)
        assert (stage.stage_k - last) * (steady_k - start_k) >= -1e-3 * high**2
        last = stage.stage_k
