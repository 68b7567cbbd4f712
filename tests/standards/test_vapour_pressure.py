"""Helium-4 vapour pressure against ITS-90 and Clausius-Clapeyron."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from simulators import vapour_pressure as helium4


def test_normal_boiling_point() -> None:
    """ITS-90: 101325 Pa is 4.2221 K (shared/standards.md); CoolProp's own scale has 4.2238 K."""
    assert helium4.bath_k(101325.0) == pytest.approx(4.2221, abs=5e-5)
    assert helium4.bath_k(101325.0) == pytest.approx(4.2238, abs=2e-3)


def test_branches_meet_at_the_lambda_point() -> None:
    """ITS-90: both sets of numbers give 2.1768 K there, to the last digit of the scale."""
    assert helium4.bath_k(helium4.LAMBDA_PA * (1 - 1e-12)) == pytest.approx(2.1768, abs=1e-5)
    assert helium4.bath_k(helium4.LAMBDA_PA * (1 + 1e-12)) == pytest.approx(2.1768, abs=1e-5)


@pytest.mark.parametrize(
    ("temperature_k", "pressure_pa"),
    [(1.25, 114.7), (1.5, 471.5), (2.1768, 5041.8), (3.0, 24046.0), (4.2, 99230.0)],
)
def test_table_of_the_scale(temperature_k: float, pressure_pa: float) -> None:
    """Table of the ITS-90 vapour pressures (from memory, four digits)."""
    assert helium4.vapour_pa(temperature_k) == pytest.approx(pressure_pa, rel=5e-4)


def test_slope_is_clausius_clapeyrons() -> None:
    """dp/dT = L / (T (1/rho_gas - 1/rho_liquid)) at 101325 Pa.

    CoolProp (Helium): 20.56 kJ/kg, 124.67 kg/m3; gas 16.8 kg/m3 (from memory).
    """
    slope = 202.65 / (helium4.bath_k(101325.0 * 1.001) - helium4.bath_k(101325.0 * 0.999))
    assert slope == pytest.approx(20560 / (4.2221 * (1 / 16.8 - 1 / 124.67)), rel=0.02)


def test_warmer_is_always_higher_in_pressure() -> None:
    pressures = np.geomspace(helium4.PRESSURE_MIN_PA, helium4.PRESSURE_MAX_PA * (1 - 1e-12), 3000)
    assert np.all(np.diff([helium4.bath_k(float(p)) for p in pressures]) > 0)


@given(st.floats(helium4.TEMPERATURE_MIN_K, helium4.TEMPERATURE_MAX_K))
def test_there_and_back(temperature_k: float) -> None:
    back = helium4.bath_k(
        min(max(helium4.vapour_pa(temperature_k), helium4.PRESSURE_MIN_PA), helium4.PRESSURE_MAX_PA)
    )
    assert back == pytest.approx(temperature_k, abs=2e-6)


@pytest.mark.parametrize("pressure_pa", [0.0, 114.0, 2e5, float("nan")])
def test_pressure_outside_the_scale_is_refused(pressure_pa: float) -> None:
    with pytest.raises(ValueError, match=r"helium-4: .* Pa; allowed is 114\.7 to 196017 Pa"):
        helium4.bath_k(pressure_pa)


@pytest.mark.parametrize("temperature_k", [1.2, 5.1])
def test_temperature_outside_the_scale_is_refused(temperature_k: float) -> None:
    with pytest.raises(ValueError, match=r"allowed is 1\.25 to 5\.0 K"):
        helium4.vapour_pa(temperature_k)
