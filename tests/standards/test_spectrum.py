"""The spectrum against astropy's least-squares periodogram and against plain sums."""

import numpy as np
import pytest
from astropy.timeseries import LombScargle

from orchestrator.analysis.spectrum import (
    amplitude_spectrum,
    false_alarm,
    fourier_sum,
    noise_floor,
    ratio_for_false_alarm,
)


def test_fourier_sum_equals_plain_sum() -> None:
    """The gridded transform against exp(-2 pi i F x) summed sample by sample."""
    random = np.random.default_rng(5)
    x = 1 / random.uniform(3, 12, 700)
    values = random.normal(size=700)
    slow = np.exp(-2j * np.pi * 0.7 * np.arange(2500)[:, None] * x) @ values
    fast = fourier_sum(x, values, 0.7, 2500)
    assert np.max(np.abs(fast - slow)) < 1e-6 * np.sum(np.abs(values))


@pytest.mark.parametrize("weighted", [False, True])
def test_power_equals_astropy(weighted: bool) -> None:
    """Floating mean, with and without weights, on unevenly spaced 1/B."""
    random = np.random.default_rng(6)
    x = 1 / np.linspace(3, 12, 900)
    error = random.uniform(0.5, 2.0, 900) if weighted else np.ones(900)
    values = 0.4 * np.cos(2 * np.pi * 410 * x + 1) + error * random.normal(size=900) + 3
    ours = amplitude_spectrum(x, values, 0.5, 2400, 1 / error**2 if weighted else None)
    theirs = LombScargle(x, values, dy=error, fit_mean=True).power(
        ours.frequency_t, method="slow", assume_regular_frequency=False
    )
    above = ours.frequency_t > 8  # below, less than two periods: both are ill-conditioned
    assert np.max(np.abs(ours.power - theirs)[above]) < 1e-6
    assert ours.frequency_t[np.argmax(ours.power)] == pytest.approx(410, abs=1)


def test_amplitude_of_a_clean_sine() -> None:
    """A sine of amplitude 0.3 on an offset is read as 0.3 at its frequency."""
    x = 1 / np.linspace(4, 11, 1200)
    spectrum = amplitude_spectrum(x, 0.3 * np.sin(2 * np.pi * 200 * x) + 7, 1.0, 400)
    assert spectrum.amplitude[199] == pytest.approx(0.3, rel=1e-4)


def test_noise_floor_is_the_mean_power_despite_peaks() -> None:
    """Exponential powers of mean 2 with a few large lines."""
    random = np.random.default_rng(7)
    power = random.exponential(2.0, 6000)
    power[::500] = 1e4
    floor = noise_floor(power, 200)
    assert np.median(floor) == pytest.approx(2.0, rel=0.1)
    assert floor.max() < 3.0


def test_false_alarm_is_the_frequency_of_false_alarms() -> None:
    """Maximum of 300 exponential powers over a floor from their median, 4000 times."""
    random = np.random.default_rng(8)
    power = random.exponential(1.0, (4000, 300))
    highest = power.max(axis=1)
    limit = ratio_for_false_alarm(0.05, 300, 1e6)
    assert np.mean(highest > limit) == pytest.approx(0.05, abs=0.012)
    assert false_alarm(limit, 300, 1e6) == pytest.approx(0.05)
    assert ratio_for_false_alarm(0.05, 300, 25) > limit
