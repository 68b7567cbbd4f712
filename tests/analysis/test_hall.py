"""Hall slope to density and mobility."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import constants

from orchestrator.analysis.hall import analyse_hall
from orchestrator.analysis.sweeps import AnalysisError, Sweep

DENSITY = 5e16


def hall_sweep(seed: int, low_t: float = -2.0, offset_ohm: float = 1.5) -> Sweep:
    """A sweep of 1/(n e) = 124.8 ohm/T with noise of 0.5 ohm and contacts not quite opposite."""
    random = np.random.default_rng(seed)
    field = np.linspace(low_t, 8.0, 800)
    return Sweep(
        name="hall",
        direction=1,
        time_s=np.arange(800.0),
        field_t=field,
        temperature_k=np.full(800, 1.5),
        resistance_ohm=100 * (1 + 0.002 * field**2) + 0.05 * random.normal(size=800),
        hall_ohm=offset_ohm - field / (DENSITY * constants.e) + 0.5 * random.normal(size=800),
    )


def test_density_and_mobility_within_their_errors() -> None:
    """n = 1/(e slope), mobility = slope / R(0); the sign of the slope is kept."""
    finding = analyse_hall([hall_sweep(1), hall_sweep(2, offset_ohm=-4.0)])
    assert finding.slope_ohm_per_t < 0
    assert abs(finding.density_m2 - DENSITY) < 4 * finding.density_sd_m2
    assert finding.density_sd_m2 < 1e-3 * DENSITY
    assert finding.mobility_m2_per_vs == pytest.approx(1 / (DENSITY * constants.e * 100), rel=2e-3)
    assert "1 square between" in finding.assumption
    twice = analyse_hall([hall_sweep(1)], zero_field_ohm=100.0, squares=2.0)
    assert twice.mobility_m2_per_vs == pytest.approx(2 / (DENSITY * constants.e * 100), rel=2e-3)


def test_quoted_error_is_the_scatter() -> None:
    """300 sweeps: the slope scatters as quoted within 15 percent."""
    pulls = []
    for seed in range(300):
        finding = analyse_hall([hall_sweep(seed)])
        pulls.append((finding.density_m2 - DENSITY) / finding.density_sd_m2)
    assert float(np.std(pulls)) == pytest.approx(1.0, abs=0.15)
    assert abs(float(np.mean(pulls))) < 0.3


def test_no_mobility_without_a_zero_field_resistance() -> None:
    """A sweep from 3 T up does not show R(0), and none is made up."""
    finding = analyse_hall([hall_sweep(3, low_t=3.0)])
    assert finding.mobility_m2_per_vs is None
    assert finding.zero_field_ohm is None


def test_hall_refuses_what_it_cannot_use() -> None:
    """No Hall column, missing values, no slope, no geometry."""
    good = hall_sweep(4)
    assert good.hall_ohm is not None
    with pytest.raises(AnalysisError, match="no sweep has a Hall resistance"):
        analyse_hall([replace(good, hall_ohm=None)])
    with pytest.raises(AnalysisError, match='"hall": hall_ohm or field_t has values missing'):
        analyse_hall([replace(good, hall_ohm=np.where(good.time_s == 5, np.nan, good.hall_ohm))])
    noise = np.random.default_rng(0).normal(size=800)
    with pytest.raises(AnalysisError, match="allowed: above 3 standard deviations"):
        analyse_hall([replace(good, hall_ohm=noise)])
    with pytest.raises(AnalysisError, match="squares: 0"):
        analyse_hall([good], squares=0.0)
