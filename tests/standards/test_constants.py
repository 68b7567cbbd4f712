"""Values of physics.md's table: constants and conversions, each with its source."""

import math

import pytest
from scipy import constants

from orchestrator.physics import lifshitz_kosevich, lockin, orbits
from orchestrator.physics.landau import landau_moment


def test_damping_scale() -> None:
    """2 pi^2 k_B m_e / (hbar e) = 14.6932 T/K, CODATA (Shoenberg 1984 quotes 14.69)."""
    assert pytest.approx(14.6932, abs=5e-5) == lifshitz_kosevich.DAMPING_T_PER_K


def test_dingle_temperature_of_one_picosecond() -> None:
    """hbar / (2 pi k_B 1 ps) = 1.2157 K, CODATA."""
    assert lifshitz_kosevich.dingle_from_quantum_lifetime(1e-12) == pytest.approx(1.2157, abs=5e-5)


def test_cyclotron_energy() -> None:
    """hbar e / (m_e k_B) = 1.34343 K/T, CODATA."""
    assert pytest.approx(1.34343, abs=1e-5) == orbits.CYCLOTRON_K_PER_T
    assert orbits.cyclotron_energy_j(1.0, 1.0) / constants.k == pytest.approx(1.34343, abs=1e-5)


def test_von_klitzing_constant() -> None:
    """h / e^2 = 25812.80745... ohm, exact in the SI since 2019."""
    assert pytest.approx(25812.80745, abs=1e-5) == orbits.VON_KLITZING_OHM


def test_density_and_frequency_of_a_two_dimensional_gas() -> None:
    """n = 1.57e15 m^-2 with g = 2 gives F = 3.2465 T (Landau level degeneracy e B / h)."""
    assert orbits.frequency_of_density_2d_t(1.57e15, 2) == pytest.approx(3.2465, abs=5e-5)
    assert orbits.density_2d_m2(3.2465, 2) == pytest.approx(1.57e15, rel=2e-5)


def test_landau_diamagnetism_at_one() -> None:
    """1 - coth 1 = -0.31304 (Landau 1930; arithmetic)."""
    assert float(landau_moment(1.0)) == pytest.approx(-0.31304, abs=1e-5)


def test_johnson_noise() -> None:
    """1 kilo-ohm at 300 K: 4.07 nV per root hertz (Nyquist 1928)."""
    assert lockin.johnson_noise_v_per_rthz(1e3, 300.0) == pytest.approx(4.07e-9, abs=0.005e-9)


def test_quantised_hall_resistance_at_filling_one() -> None:
    """B / (n e) at filling 1 is the von Klitzing constant (definition)."""
    field, density = 10.0, orbits.density_2d_m2(10.0, 1)
    assert orbits.filling_factor(density, field) == pytest.approx(1.0)
    assert field / (density * constants.e) == pytest.approx(orbits.VON_KLITZING_OHM)
    assert math.isfinite(orbits.VON_KLITZING_OHM)
