"""Quoted uncertainties against the scatter of many simulated nights."""

from functools import cache

import numpy as np
import numpy.typing as npt
import pytest

from orchestrator.analysis.ladder import analyse_ladder
from tests.analysis.simulated import LIGHT, fields, simulated_ladder

NIGHTS = 200


@cache
def pulls() -> dict[str, npt.NDArray[np.float64]]:
    """(found - true) / quoted of each parameter, over nights of 3 temperatures x 377 points.

    The frequency is found blind; noise passes a four-pole filter of 0.3 s with the signal.
    """
    field = fields(6.0, 12.0, 500.0, 1.0)
    truth = {"frequency": LIGHT.frequency_t, "mass": LIGHT.mass, "dingle": LIGHT.dingle_k}
    found: dict[str, list[float]] = {name: [] for name in truth}
    for night in range(NIGHTS):
        sweeps = simulated_ladder(night, field, (0.4, 3.0, 6.0), (LIGHT,), substeps=8)
        near = [o for o in analyse_ladder(sweeps) if abs(o.frequency_t - 410) < 5]
        assert len(near) == 1
        orbit = near[0]
        assert orbit.mass is not None
        assert orbit.mass_sd is not None
        assert orbit.dingle_k is not None
        assert orbit.dingle_sd_k is not None
        found["frequency"].append((orbit.frequency_t - truth["frequency"]) / orbit.frequency_sd_t)
        found["mass"].append((orbit.mass - truth["mass"]) / orbit.mass_sd)
        found["dingle"].append((orbit.dingle_k - truth["dingle"]) / orbit.dingle_sd_k)
    return {name: np.asarray(values) for name, values in found.items()}


@pytest.mark.parametrize("name", ["frequency", "mass", "dingle"])
def test_scatter_is_as_quoted_and_without_bias(name: str) -> None:
    """Over 200 nights: scatter within 15 percent of the quoted one, mean within 0.3 of it.

    The scatter of 200 nights is itself known to 5 percent.
    """
    pull = pulls()[name]
    assert float(np.std(pull)) == pytest.approx(1.0, abs=0.15)
    assert abs(float(np.mean(pull))) < 0.3


def test_ignoring_correlated_noise_would_quote_too_little() -> None:
    """The check has teeth: four poles of 0.3 s raise the variance near the signal by over 1.5."""
    from orchestrator.physics.lockin import noise_correlation

    met_per_sample = 410 / (9 * 500)
    inflation = 1 + 2 * sum(
        noise_correlation(k, 0.3, 4) * np.cos(2 * np.pi * met_per_sample * k) for k in range(1, 9)
    )
    assert inflation > 1.5
    assert 1 / np.sqrt(inflation) < 0.85
