"""The damping factors against slow twins, limits and hand-checked values."""

import math

import numpy as np
import pytest
from scipy import constants, integrate

from orchestrator.physics.lifshitz_kosevich import (
    DAMPING_T_PER_K,
    dingle_factor,
    dingle_from_quantum_lifetime,
    oscillation,
    quantum_lifetime_from_dingle,
    spin_factor,
    thermal_factor,
)


@pytest.mark.parametrize("harmonic", [1, 2])
@pytest.mark.parametrize("temperature_k", [0.3, 1.5, 6.0])
@pytest.mark.parametrize("field_t", [3.0, 12.0])
def test_thermal_factor_equals_average_over_fermi_edge(
    field_t: float, temperature_k: float, harmonic: int
) -> None:
    """R_T is the cosine in energy averaged over -df/dE, integrated numerically.

    Shoenberg (1984), section 2.3: phase smearing by the derivative of the Fermi function.
    """
    mass = 0.42
    cyclotron_j = constants.hbar * constants.e * field_t / (mass * constants.m_e)
    thermal_j = constants.k * temperature_k

    def integrand(u: float) -> float:
        edge = 1 / (4 * math.cosh(u / 2) ** 2)
        return edge * math.cos(2 * math.pi * harmonic * u * thermal_j / cyclotron_j)

    slow, _ = integrate.quad(integrand, -60, 60, limit=800, epsabs=1e-12)
    assert thermal_factor(field_t, temperature_k, mass, harmonic) == pytest.approx(slow, abs=1e-10)


def test_dingle_factor_equals_average_over_lorentzian_levels() -> None:
    """R_D is the cosine averaged over Landau levels of Lorentzian shape, half width hbar / 2 tau.

    Dingle (1952): T_D = hbar / (2 pi k_B tau_q).
    """
    field_t, mass, lifetime_s = 6.0, 0.19, 1.2e-12
    cyclotron_j = constants.hbar * constants.e * field_t / (mass * constants.m_e)
    half_width = constants.hbar / (2 * lifetime_s) / cyclotron_j
    # Half line, cosine weight: QUADPACK's Fourier integral.
    slow, _ = integrate.quad(
        lambda u: 2 * half_width / math.pi / (u**2 + half_width**2),
        0,
        math.inf,
        weight="cos",
        wvar=2 * math.pi,
    )
    dingle_k = dingle_from_quantum_lifetime(lifetime_s)
    assert dingle_factor(field_t, dingle_k, mass) == pytest.approx(slow, rel=1e-6)


def test_thermal_factor_is_exact_in_its_limits() -> None:
    """1 as X goes to 0 with the series 1 - X^2/6, 0 as the field goes to 0, never a warning."""
    with np.errstate(all="raise", under="ignore"):
        assert thermal_factor(10.0, 0.0, 0.2) == 1.0
        for x in (1e-12, 1e-6, 1e-3):
            field = DAMPING_T_PER_K * 0.2 / x
            assert thermal_factor(field, 1.0, 0.2) == pytest.approx(1 - x**2 / 6, abs=1e-12)
        values = thermal_factor(np.array([0.0, 5e-324, 1e-300, 1e-6]), 1.0, 0.2)
        assert np.all(values == 0.0)
        assert thermal_factor(0.0, 4.0, 0.2) == 0.0
        x = 30.0
        expected = x / math.sinh(x)
        assert thermal_factor(DAMPING_T_PER_K / x, 1.0, 1.0) == pytest.approx(expected, rel=1e-13)


def test_factors_are_even_in_field_and_broadcast() -> None:
    """A magnet run backwards damps as forwards; one temperature a sample is allowed."""
    field = np.array([-9.0, 9.0])
    temperature = np.array([1.0, 1.0])
    factor = thermal_factor(field, temperature, 0.3)
    assert factor[0] == factor[1] == thermal_factor(9.0, 1.0, 0.3)
    assert dingle_factor(-9.0, 1.0, 0.3) == dingle_factor(9.0, 1.0, 0.3)
    assert thermal_factor(9.0, np.array([1.0, 2.0]), 0.3).shape == (2,)


def test_harmonics_damp_as_powers_of_the_dingle_factor() -> None:
    """R_D of harmonic p is that of the first to the power p."""
    first = dingle_factor(7.0, 0.9, 0.31)
    assert dingle_factor(7.0, 0.9, 0.31, 3) == pytest.approx(first**3, rel=1e-13)


def test_spin_factor_vanishes_at_the_spin_zero() -> None:
    """g m = 1 puts the two spins in opposite phase (Shoenberg 1984)."""
    assert spin_factor(2.0, 0.5) == pytest.approx(0.0, abs=1e-15)
    assert spin_factor(2.0, 1.0) == pytest.approx(-1.0)
    assert spin_factor(2.0, 0.5, 2) == pytest.approx(-1.0)


def test_oscillation_is_the_two_dimensional_formula() -> None:
    """Coleridge, Stoner and Fletcher (1989): 4 R_T exp(-pi / mu_q B) cos(2 pi F/B - pi)."""
    field = np.linspace(1.0, 3.0, 200)
    frequency, mass, lifetime = 20.0, 0.067, 1e-12
    mobility = constants.e * lifetime / (mass * constants.m_e)
    x = 2 * math.pi**2 * constants.k * 1.5 * mass * constants.m_e
    x = x / (constants.hbar * constants.e * field)
    expected = 4 * x / np.sinh(x) * np.exp(-math.pi / (mobility * field))
    expected = expected * np.cos(2 * math.pi * frequency / field - math.pi)
    got = oscillation(
        field, 1.5, frequency, mass, dingle_from_quantum_lifetime(lifetime), amplitude=4.0
    )
    np.testing.assert_allclose(got, expected, atol=1e-12)
    assert oscillation(0.0, 1.5, frequency, mass, 1.0) == 0.0


def test_quantum_lifetime_and_dingle_temperature_are_each_others_inverse() -> None:
    """And refuse what has no meaning, in words."""
    assert quantum_lifetime_from_dingle(dingle_from_quantum_lifetime(3e-13)) == pytest.approx(3e-13)
    with pytest.raises(ValueError, match=r"quantum lifetime: 0\.0 s, allowed: above 0 s"):
        dingle_from_quantum_lifetime(0.0)
    with pytest.raises(ValueError, match="Dingle temperature: nan K"):
        quantum_lifetime_from_dingle(math.nan)
