"""The lock-in: exact filter, exact noise, overload, digitising."""

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import signal, stats

from orchestrator.physics.lifshitz_kosevich import dingle_factor, spin_factor, thermal_factor
from simulators import lowpass
from simulators.lockin import LockIn, LockInParameters
from simulators.lockin_panel import LockInPanel
from simulators.noise import NoiseSource
from simulators.sample import SampleParameters
from simulators.world import World
from tests.simulators.rigs import Clock, quiet, sweep


@pytest.mark.parametrize("order", [1, 2, 3, 4])
@pytest.mark.parametrize("poll_s", [0.05, 1.0, 7.0])
def test_step_settles_as_the_erlang_distribution(order: int, poll_s: float) -> None:
    """n equal poles in cascade: step response is the Erlang(n, tau) distribution function."""
    lock_in = LockIn(
        LockInParameters("a", order=order, time_constant_s=1.0, noise_v_per_rthz=0.0),
        NoiseSource(1, "a"),
    )
    for i in range(1, 8):
        lock_in.advance(poll_s, [100.0] * 4, None)
        wanted = 1e-4 * stats.gamma.cdf(i * poll_s, order)
        assert lock_in.clean_x_v == pytest.approx(wanted, abs=1e-13)


@pytest.mark.parametrize(("order", "to_99"), [(1, 4.605), (2, 6.638), (3, 8.406), (4, 10.045)])
def test_99_percent_is_reached_at_the_tabulated_time(order: int, to_99: float) -> None:
    m, w = lowpass.response(order, to_99, 1)
    assert m.shape == (order, order)
    assert float(w[-1].sum()) == pytest.approx(0.99, abs=2e-5)


@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_noise_has_the_variance_and_autocorrelation_of_the_filter(order: int) -> None:
    """ENBW 1/4, 1/8, 3/32, 5/64 over tau; the autocorrelation of n equal poles is the Matern
    function of order n - 1/2 (Rasmussen & Williams 2006, eq. 4.16, in units of tau)."""
    density, tau_s, n = 1e-6, 0.7, 20000
    lock_in = LockIn(
        LockInParameters("a", order=order, time_constant_s=tau_s, noise_v_per_rthz=density),
        NoiseSource(3, "a"),
    )
    pairs = []
    for _ in range(n):
        lock_in.advance(1.0, [0.0] * 4, None)
        pairs.append(lock_in.output_v())
    values = np.array(pairs)
    u = 1.0 / tau_s
    polynomial = [1, 1 + u, 1 + u + u**2 / 3, 1 + u + 2 * u**2 / 5 + u**3 / 15][order - 1]
    correlation = polynomial * math.exp(-u)
    variance = density**2 * [1 / 4, 1 / 8, 3 / 32, 5 / 64][order - 1] / tau_s
    # Correlated draws carry less: 5 standard errors with n shrunk by the correlation.
    error = 5 * math.sqrt(2 / n * (1 + correlation**2) / (1 - correlation**2))
    for quadrature in values.T:
        assert np.mean(quadrature**2) == pytest.approx(variance, rel=error, abs=0)
        lagged = np.mean(quadrature[1:] * quadrature[:-1]) / np.mean(quadrature**2)
        assert lagged == pytest.approx(correlation, abs=error)
    assert abs(np.corrcoef(values.T)[0, 1]) < error


@pytest.mark.parametrize("order", [1, 2, 3, 4])
@pytest.mark.parametrize("step", [1e-200, 1e-13, 1e-4, 0.1, 3.0])
def test_noise_steps_add_up_to_the_stationary_covariance(order: int, step: float) -> None:
    """M P M' + C C' = P, the discrete Lyapunov equation, for any step."""
    m, c = lowpass.noise_step(order, step)
    stationary = lowpass.stationary_noise(order)
    p = stationary @ stationary.T
    assert m @ p @ m.T + c @ c.T == pytest.approx(p, rel=1e-9)


def test_an_instant_of_noise_goes_with_powers_of_its_length() -> None:
    """White noise integrated i times: sigma goes with the length to the power of i + 1/2."""
    _, shorter = lowpass.noise_step(4, 1e-14)
    _, longer = lowpass.noise_step(4, 1e-10)
    powers = 1e-4 ** (np.arange(4)[:, None] + 0.5)
    assert shorter == pytest.approx(longer * powers, rel=1e-5, abs=0)
    assert longer[0, 0] ** 2 == pytest.approx(0.5e-10, rel=1e-9, abs=0)


@pytest.mark.parametrize(("order", "enbw"), [(1, 1 / 4), (2, 1 / 8), (3, 3 / 32), (4, 5 / 64)])
def test_stationary_variance_is_the_equivalent_noise_bandwidth(order: int, enbw: float) -> None:
    """Table of n RC poles: 1/4 tau, 1/8 tau, 3/32 tau, 5/64 tau; input of 1 V/sqrt(Hz)."""
    output = lowpass.stationary_noise(order)[-1]
    assert output @ output == pytest.approx(enbw, rel=1e-12)


def resistance_ohm(
    p: SampleParameters, field_t: NDArray[np.float64], temperature_k: float
) -> NDArray[np.float64]:
    """R_xx by the project's array physics, which was written apart from the simulator."""
    relative = 1 + p.magnetoresistance_per_t * field_t + p.magnetoresistance_per_t2 * field_t**2
    for o in p.orbits:
        for n in range(1, o.harmonics + 1):
            spin = 1.0 if o.g_factor is None else spin_factor(o.g_factor, o.mass, n)
            damping = thermal_factor(field_t, temperature_k, o.mass, n) * dingle_factor(
                field_t, o.dingle_k, o.mass, n
            )
            cosine = np.cos(2 * np.pi * n * (o.frequency_t / field_t - 0.5 + o.phase))
            relative = relative + o.amplitude / np.sqrt(n) * spin * damping * cosine
    return p.resistance_ohm * relative


def test_oscillation_read_once_a_second_agrees_with_a_fine_reference() -> None:
    """Against the project's own array physics and scipy's lsim at 2 ms; 1e-4 of the range.

    410 T is met at 0.51 Hz at 4 T and 20 mT/s, its second harmonic at 1.0 Hz.
    """
    p = quiet()
    clock = Clock()
    world = World(replace(p, stage=replace(p.stage, start_k=0.3, eddy_w_s2_per_t2=0.0)), clock)
    sweep(world, 4.0, 5.0)  # at the limit of the charge voltage: 0.05 T/s
    clock.time_s = 1000.0
    world.advance()
    rate = 0.02
    sweep(world, 10.0, rate)
    seconds = 120
    fine_s = np.arange(0, seconds + 1e-9, 2e-3)
    field_t = 4.0 + rate * fine_s
    ohms = resistance_ohm(p.sample, field_t, 0.3)
    assert np.ptp(signal.detrend(ohms)) > 20.0  # there is something to see
    # Real poles in cascade, each with the signal's own start as its steady state.
    reference = ohms * 1e-6
    for _ in range(4):
        system = signal.StateSpace([[-1 / 0.3]], [[1 / 0.3]], [[1.0]], [[0.0]])
        _, reference, _ = signal.lsim(system, reference, fine_s, X0=[reference[0]])
    worst = 0.0
    for i in range(1, seconds + 1):
        clock.time_s = 1000.0 + i
        world.advance()
        worst = max(worst, abs(world.lock_ins["xx"].clean_x_v - reference[500 * i]))
    assert worst < 1e-4 * 1e-3  # of a full scale of 1 mV


def test_hall_voltage_is_odd_and_exact() -> None:
    """R_xy = B / (n e): 6.2415 ohm/T at 1e18 m^-2."""
    p = quiet()
    sample = replace(p.sample, hall_density_m2=1e18)
    for sign in (1, -1):
        clock = Clock()
        world = World(replace(p, sample=sample), clock)
        sweep(world, sign * 2.0, 0.05)
        clock.time_s = 200.0
        world.advance()
        x_v = world.lock_ins["xy"].clean_x_v
        assert x_v == pytest.approx(sign * 2 * 6.241509 * 1e-6, rel=1e-6)


def test_pickup_is_proportional_to_the_rate_and_changes_sign_with_it() -> None:
    p = quiet()
    coil_only = replace(p.lock_ins[1], pickup_v_s_per_t=1e-3)
    sample = replace(p.sample, hall_density_m2=1e30)
    clock = Clock()
    world = World(replace(p, sample=sample, lock_ins=(coil_only,)), clock)
    for target_t, end_s, wanted in ((1.0, 50.0, 1e-5), (0.0, 80.0, -1e-5), (0.0, 300.0, 0.0)):
        sweep(world, target_t, 0.01)
        clock.time_s = end_s
        world.advance()
        assert world.lock_ins["xy"].clean_x_v == pytest.approx(wanted, abs=1e-9)


def test_overload_is_flagged_and_the_output_limited() -> None:
    clock = Clock()
    world = World(quiet(), clock)
    panel = LockInPanel(world, "xx")
    clock.time_s = 60.0
    assert panel.execute("STAT:QUES:COND?") == "0"
    assert panel.execute("MEAS:XY?") == "1.000003815E-04,0.000000000E+00"  # 1e-3 / 2^19 steps
    panel.execute("SENS:VOLT:RANG 5E-5")
    assert panel.execute("STAT:QUES:COND?;:MEAS:XY?") == "1;5.000000000E-05,0.000000000E+00"
    panel.execute("SENS:VOLT:RANG 1.1E-4")
    assert panel.execute("STAT:QUES:COND?") == "0"


def test_settings_are_read_back_and_amplitude_scales_the_signal() -> None:
    clock = Clock()
    world = World(quiet(), clock)
    panel = LockInPanel(world, "xx")
    panel.execute("SENS:FILT:TCON 100 MS;ORD 2;:SOUR:VOLT:AMPL 0.5;:SOUR:FREQ 13")
    assert panel.execute("SENS:FILT:TCON?;ORD?;:SOUR:VOLT:AMPL?;:SOUR:FREQ?") == (
        "1.000000000E-01;2;5.000000000E-01;1.300000000E+01"
    )
    clock.time_s = 10.0
    world.advance()
    assert world.lock_ins["xx"].clean_x_v == pytest.approx(0.5e-6 * 100.0, rel=1e-9)
