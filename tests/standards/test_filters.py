"""Filters of one to four poles: bandwidth, settling, lag and loss, from linear systems theory."""

import math

import numpy as np
import pytest
from scipy import integrate, stats

from orchestrator.physics import lockin

ENBW = {1: 1 / 4, 2: 1 / 8, 3: 3 / 32, 4: 5 / 64}
SETTLED_99 = {1: 4.605, 2: 6.638, 3: 8.406, 4: 10.045}


@pytest.mark.parametrize("poles", [1, 2, 3, 4])
def test_noise_bandwidth(poles: int) -> None:
    """1/4, 1/8, 3/32, 5/64 over tau (physics.md), and the integral of |H|^2."""
    tau = 0.3
    assert lockin.enbw_hz(tau, poles) == pytest.approx(ENBW[poles] / tau, rel=1e-12)
    slow, _ = integrate.quad(
        lambda f: abs(complex(lockin.filter_response(f, tau, poles))) ** 2, 0, math.inf
    )
    assert lockin.enbw_hz(tau, poles) == pytest.approx(slow, rel=1e-6)


@pytest.mark.parametrize("poles", [1, 2, 3, 4])
def test_settling_time(poles: int) -> None:
    """To 99 percent: 4.605, 6.638, 8.406, 10.045 tau (physics.md), and scipy's Erlang."""
    assert lockin.settle_time_s(0.99, 1.0, poles) == pytest.approx(SETTLED_99[poles], abs=5e-4)
    assert lockin.settle_time_s(0.9, 2.0, poles) == pytest.approx(
        float(stats.erlang(poles, scale=2.0).ppf(0.9)), rel=1e-9
    )


@pytest.mark.parametrize("poles", [1, 2, 3, 4])
def test_lag_is_the_group_delay_at_low_frequency(poles: int) -> None:
    """-d arg H / d omega at 0 is n tau."""
    f = 1e-5
    phase = np.angle(complex(lockin.filter_response(f, 0.7, poles)))
    assert lockin.lag_s(0.7, poles) == pytest.approx(-phase / (2 * math.pi * f), rel=1e-6)


@pytest.mark.parametrize("poles", [1, 2, 4])
@pytest.mark.parametrize("loss", [0.01, 0.2])
def test_rate_for_filter_loss_loses_exactly_that(poles: int, loss: float) -> None:
    """The response at F (dB/dt) / B^2 is 1 - loss."""
    rate = lockin.rate_for_filter_loss(6.0, 1130.0, 0.3, poles, loss)
    met = lockin.frequency_met_hz(6.0, -rate, 1130.0)
    assert abs(complex(lockin.filter_response(met, 0.3, poles))) == pytest.approx(1 - loss)


@pytest.mark.parametrize("poles", [1, 2, 3, 4])
def test_noise_correlation_is_the_transform_of_the_response(poles: int) -> None:
    """Wiener and Khinchin: the autocorrelation is the cosine transform of |H|^2."""
    tau = 0.3
    for interval in (0.1, 1.0):
        slow, _ = integrate.quad(
            lambda f: abs(complex(lockin.filter_response(f, tau, poles))) ** 2,
            0,
            math.inf,
            weight="cos",
            wvar=2 * math.pi * interval,
        )
        assert lockin.noise_correlation(interval, tau, poles) == pytest.approx(
            slow / lockin.enbw_hz(tau, poles), abs=1e-6
        )


def test_variance_inflation_of_four_poles() -> None:
    """1 s samples behind 4 poles of 0.3 s: 1.93, from Poisson's sum of |H|^2 at multiples of 1 Hz.

    Sampled noise has at 0 Hz the density of 0, 1, 2, ... Hz folded onto it, against a mean of
    2 ENBW over 1 Hz.
    """
    folded = 1 + 2 * sum(abs(complex(lockin.filter_response(k, 0.3, 4))) ** 2 for k in range(1, 50))
    inflation = 1 + 2 * sum(lockin.noise_correlation(k, 0.3, 4) for k in range(1, 30))
    assert inflation == pytest.approx(folded / (2 * lockin.enbw_hz(0.3, 4)), rel=1e-6)
    assert inflation == pytest.approx(1.93, abs=0.01)


def test_no_filter_and_bad_filters() -> None:
    """Time constant 0 passes everything; impossible filters are refused by value."""
    assert complex(lockin.filter_response(5.0, 0.0, 2)) == 1.0
    assert lockin.rate_for_filter_loss(6.0, 400.0, 0.0, 2, 0.1) == math.inf
    assert lockin.noise_correlation(1.0, 0.0, 2) == 0.0
    with pytest.raises(ValueError, match="filter poles: 0, allowed: 1 to 8"):
        lockin.filter_response(1.0, 0.1, 0)
    with pytest.raises(ValueError, match=r"filter loss: 1\.0, allowed: between 0 and 1"):
        lockin.rate_for_filter_loss(6.0, 400.0, 0.1, 2, 1.0)
    with pytest.raises(ValueError, match="settled fraction: 1"):
        lockin.settle_time_s(1.0, 0.1, 2)
