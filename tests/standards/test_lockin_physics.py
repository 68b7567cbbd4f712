"""The simulated lock-in against the raw signal in time, textbook filters, Nyquist and Poisson."""

import math
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import signal, stats

from simulators.interference import Interference, Knocks
from simulators.lockin import LockIn
from simulators.lockin_parameters import LockInParameters, Surroundings
from simulators.noise import NoiseSource, johnson_v2_per_hz
from simulators.world import World
from tests.simulators.rigs import Clock, quiet

CURRENT_A, OHM = 1e-6, 150.0
WIRED = LockInParameters(
    "a",
    noise_v_per_rthz=0.0,
    wiring_phase_rad=0.3,
    coupling_per_hz=3e-7,
    third_harmonic=0.02,
    third_harmonic_at_a=2e-6,
    mains_v=(2e-5, 0.0, 1e-5),
    mains_phase_rad=0.8,
    time_constant_s=0.1,
)


def raw_v(time_s: NDArray[np.float64], frequency_hz: float) -> NDArray[np.float64]:
    """The voltage at the input itself, in time, of WIRED at 1 V: no phasors."""
    omega = 2 * math.pi * frequency_hz
    current = math.sqrt(2) * CURRENT_A * np.cos(omega * time_s + 0.3)
    # R i + c i^3 gives a third harmonic of c I^2 / (2 R) of the linear voltage.
    cubic = 2 * OHM * 0.02 / (2e-6) ** 2
    sample = OHM * current + cubic * current**3
    coupled = -math.sqrt(2) * 3e-7 * frequency_hz * np.sin(omega * time_s)  # d/dt of a cosine
    line = 2 * math.pi * 50.0 * time_s + 0.8
    mains = math.sqrt(2) * (2e-5 * np.cos(line) + 1e-5 * np.cos(3 * line))
    return np.asarray(sample + coupled + mains)


@pytest.mark.parametrize(
    ("frequency_hz", "harmonic", "phase_rad"),
    [(49.0, 1, 0.0), (77.7, 1, -1.1), (77.7, 3, 0.4), (50.3, 3, 2.0), (77.7, 2, 0.0)],
)
def test_output_is_that_of_a_mixer_and_four_poles_on_the_raw_signal(
    frequency_hz: float, harmonic: int, phase_rad: float
) -> None:
    """sqrt(2) v(t) exp(-i(n w t + phase)) at 0.25 ms through four discrete poles of scipy."""
    step_s, seconds = 2.5e-4, 5
    time_s = np.arange(0, seconds + step_s / 2, step_s)
    mixer = math.sqrt(2) * np.exp(-1j * (2 * np.pi * harmonic * frequency_hz * time_s + phase_rad))
    mixed = raw_v(time_s, frequency_hz) * mixer
    b, a, _ = signal.cont2discrete(([1.0], [0.1, 1.0]), step_s, method="foh")
    for _ in range(4):
        mixed = signal.lfilter(np.ravel(b), np.ravel(a), mixed)
    clock = Clock()
    lock_in = LockIn(WIRED, NoiseSource(1, "a"), Interference(WIRED, clock))
    lock_in.set_frequency(frequency_hz)
    lock_in.set_harmonic(harmonic)
    lock_in.set_phase(phase_rad)
    for i in range(1, 10 * seconds + 1):
        clock.time_s = i / 10
        lock_in.advance(0.1, [OHM] * 4, None)
        if i >= 30:  # what the sum frequencies leave of the start has gone
            wanted = complex(mixed[round(0.1 * i / step_s)])
            assert lock_in.clean_v() == pytest.approx(wanted, abs=2e-9)  # of 170 uV


@pytest.mark.parametrize(("harmonic", "share"), [(1, 1.0), (2, 0.0), (3, 0.0), (7, 0.0)])
def test_a_linear_sample_shows_nothing_at_harmonics(harmonic: int, share: float) -> None:
    """Nor does the pickup of dB/dt, here 5 mV s/T at 10 mT/s."""
    p = replace(WIRED, third_harmonic=0.0, mains_v=(), coupling_per_hz=0.0, pickup_v_s_per_t=5e-3)
    lock_in = LockIn(p, NoiseSource(1, "a"))
    lock_in.set_harmonic(harmonic)
    lock_in.advance(10.0, [OHM] * 4, [0.01] * 4)
    assert abs(lock_in.clean_v()) == pytest.approx(share * 2e-4, rel=1e-12)


@pytest.mark.parametrize("order", [1, 2, 3, 4])
@pytest.mark.parametrize("mains_hz", [50.0, 60.0])
def test_mains_comes_through_at_the_beat_as_the_poles_let_it(order: int, mains_hz: float) -> None:
    """|H| = (1 + (2 pi (f_ref - k f_mains) tau)^2)^(-n/2), turning at the beat frequency."""
    p = LockInParameters("a", noise_v_per_rthz=0.0, mains_v=(0.0, 7e-6), order=order)
    clock = Clock()
    lock_in = LockIn(p, NoiseSource(1, "a"), Interference(p, clock, Surroundings(mains_hz)))
    lock_in.set_frequency(2 * mains_hz - 1.3)
    seen = []
    for i in range(4):
        clock.time_s = 30.0 + 0.05 * i
        seen.append(lock_in.clean_v())
    wanted_v = 7e-6 * (1 + (2 * math.pi * 1.3 * 0.3) ** 2) ** (-order / 2)
    assert [abs(z) for z in seen] == pytest.approx([wanted_v] * 4, rel=1e-9, abs=0)
    turns = np.diff(np.unwrap(np.angle(seen))) / (2 * math.pi * 0.05)
    assert turns == pytest.approx([1.3] * 3, rel=1e-6)


def test_johnson_noise_of_one_kiloohm_at_room_temperature() -> None:
    """4.07 nV/sqrt(Hz): physics.md; Nyquist, Phys. Rev. 32, 110 (1928)."""
    assert math.sqrt(johnson_v2_per_hz(1e3, 300.0)) == pytest.approx(4.07e-9, rel=1e-3, abs=0)


def test_johnson_noise_of_a_world_adds_in_quadrature() -> None:
    """A sample of 1 kilohm at 300 K, 3 nV/sqrt(Hz) of the input: 5.06 nV/sqrt(Hz) in X and Y."""
    p = quiet()
    warm = replace(
        p.stage, maximum_k=400.0, start_k=300.0, heat_capacity_j_per_k=1e3, cooling_w_per_k=1e-9
    )
    noisy = replace(
        p.lock_ins[1], johnson_noise=True, noise_v_per_rthz=3e-9, amplitude_v=0.0,
        time_constant_s=0.2,
    )  # fmt: skip
    sample = replace(p.sample, resistance_ohm=1e3)
    clock = Clock()
    world = World(replace(p, stage=warm, sample=sample, lock_ins=(noisy,)), clock)
    n = 3000
    values = []
    for _ in range(n):
        clock.time_s += 2.0  # ten time constants: independent
        world.advance()
        values.extend(world.lock_ins["xy"].output_v())
    wanted = (4.07e-9**2 + 3e-9**2) / (4 * 0.2)
    assert np.mean(np.square(values)) == pytest.approx(wanted, rel=5 * math.sqrt(1 / n), abs=0)


@pytest.mark.parametrize(("order", "harmonic"), [(1, 1), (2, 3), (3, 1), (4, 2)])
def test_spectrum_of_the_output_noise(order: int, harmonic: int) -> None:
    """Density white^2 (1 + corner / n f) |H|^2, sampled; periodogram over its expectation.

    The expectation is the transform of the autocorrelation (Matern, Rasmussen & Williams 2006,
    eq. 4.16, from memory) with Bartlett's triangle; ordinates are exponential: chi-square. Where
    leakage from low frequencies counts they are not independent, and are left out.
    """
    tau_s, interval_s, n = 0.7, 0.5, 8192
    p = LockInParameters(
        "a", order=order, time_constant_s=tau_s, noise_v_per_rthz=4e-9,
        noise_corner_hz=200.0, frequency_hz=20.0,
    )  # fmt: skip
    lock_in = LockIn(p, NoiseSource(11, "a"))
    lock_in.set_harmonic(harmonic)
    # Noise that is in the filter keeps its density for a while.
    values = np.empty(n, dtype=complex)
    lock_in.advance(50.0, [0.0] * 4, None)
    for i in range(n):
        lock_in.advance(interval_s, [0.0] * 4, None)
        values[i] = complex(*lock_in.output_v())
    u = np.arange(200) * interval_s / tau_s
    polynomial = [1 + 0 * u, 1 + u, 1 + u + u**2 / 3, 1 + u + 2 * u**2 / 5 + u**3 / 15][order - 1]
    density = 4e-9**2 * (1 + 200.0 / (20.0 * harmonic))
    covariance = density * [1 / 4, 1 / 8, 3 / 32, 5 / 64][order - 1] / tau_s * polynomial
    covariance *= np.exp(-u) * (1 - np.arange(200) / n)
    turn = np.exp(-2j * np.pi * np.outer(np.arange(n), np.arange(200)) / n)
    expected = 2 * (2 * (turn @ covariance).real - covariance[0])  # X and Y
    ratio = np.abs(np.fft.fft(values)) ** 2 / n / expected
    ratio = np.fft.fftshift(ratio)[np.fft.fftshift(expected) > 0.01 * expected[0]]
    assert len(ratio) > 1500
    for band in (ratio, *np.array_split(ratio, 8)):
        assert 1e-4 < stats.chi2.cdf(2 * band.sum(), 2 * len(band)) < 1 - 1e-4


def test_knocks_are_a_poisson_process_with_a_uniform_phase() -> None:
    """Waits are exponential, counts an hour have the variance of their mean, phases no order."""
    knocks = Knocks(5.0, 100.0, NoiseSource(2, "knocks"), NoiseSource(2, "a/knock"))
    hours, times, phases = 10000, [100.0], []
    while knocks.next_s < 100.0 + 3600.0 * hours:
        times.append(knocks.next_s)
        phases.append(math.atan2((z := knocks.take()).imag, z.real))
    assert stats.kstest(np.diff(times), "expon", args=(0, 720.0)).pvalue > 1e-3
    assert stats.kstest(phases, "uniform", args=(-math.pi, 2 * math.pi)).pvalue > 1e-3
    count = len(times) - 1
    assert count == knocks.count == pytest.approx(5 * hours, abs=4 * math.sqrt(5 * hours))
    per_hour = np.bincount(((np.array(times[1:]) - 100) / 3600).astype(int), minlength=hours)
    dispersion = np.sum((per_hour - per_hour.mean()) ** 2) / per_hour.mean()
    assert 1e-3 < stats.chi2.cdf(dispersion, hours - 1) < 1 - 1e-3


@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_a_knock_passes_the_filter_as_an_impulse_and_a_step(order: int) -> None:
    """Area times Erlang's density, and step times its distribution (scipy)."""
    for area_v_s, step_v in ((2e-6, 0.0), (0.0, 3e-6)):
        p = LockInParameters(
            "a", order=order, noise_v_per_rthz=0.0, knock_v_s=area_v_s, knock_step_v=step_v
        )
        clock = Clock()
        knocks = Knocks(1e-3, 0.0, NoiseSource(4, "k"), NoiseSource(4, "p"))
        lock_in = LockIn(p, NoiseSource(1, "a"), Interference(p, clock, knocks=knocks))
        first_s = knocks.next_s
        for after_s in (-1.0, 0.2, 0.9, 3.0):
            clock.time_s = first_s + after_s
            wanted = area_v_s * stats.gamma.pdf(after_s, order, scale=0.3)
            wanted += step_v * stats.gamma.cdf(after_s, order, scale=0.3)
            # Time resolves to 1e-9 s after so many seconds.
            assert abs(lock_in.clean_v()) == pytest.approx(wanted, rel=1e-6, abs=1e-18)
