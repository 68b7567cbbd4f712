"""Orbits: areas, densities and periods against direct reasoning."""

import math

import numpy as np
import pytest
from scipy import constants

from orchestrator.physics import orbits
from orchestrator.physics.landau import (
    landau_heat_capacity,
    landau_moment,
    reduced_level_distance,
)


def test_onsager_area_of_a_circle_gives_the_two_dimensional_density() -> None:
    """n = g k_F^2 / 4 pi must follow from the area pi k_F^2 (counting states in k-space)."""
    k_fermi = 3.1e8
    frequency = orbits.onsager_frequency_t(math.pi * k_fermi**2)
    assert orbits.density_2d_m2(frequency, 2) == pytest.approx(2 * k_fermi**2 / (4 * math.pi))
    assert orbits.onsager_area_per_m2(frequency) == pytest.approx(math.pi * k_fermi**2)
    assert orbits.frequency_of_density_2d_t(orbits.density_2d_m2(frequency, 4), 4) == pytest.approx(
        frequency
    )
    energy = (constants.hbar * k_fermi) ** 2 / (2 * 0.067 * constants.m_e)
    assert orbits.fermi_energy_j(frequency, 0.067) == pytest.approx(energy)


def test_density_refuses_no_degeneracy() -> None:
    """The message names value and allowed range."""
    with pytest.raises(ValueError, match="degeneracy: 0, allowed: 1 or more"):
        orbits.density_2d_m2(10.0, 0)


def test_exact_periods_change_the_phase_by_one_turn() -> None:
    """F/B differs by exactly 1 across the exact period; the first-order one lies between."""
    field, frequency = 7.3, 41.0
    below = field - orbits.period_below_t(field, frequency)
    above = field + orbits.period_above_t(field, frequency)
    assert frequency / below - frequency / field == pytest.approx(1.0)
    assert frequency / field - frequency / above == pytest.approx(1.0)
    assert (
        orbits.period_below_t(field, frequency)
        < orbits.local_period_t(field, frequency)
        < orbits.period_above_t(field, frequency)
    )
    assert orbits.period_above_t(50.0, frequency) == math.inf


def test_filling_factor_is_degeneracy_at_the_field_of_the_frequency() -> None:
    """At B = F all carriers fit in one degenerate level."""
    density = orbits.density_2d_m2(12.0, 2)
    assert orbits.filling_factor(density, 12.0) == pytest.approx(2.0)
    np.testing.assert_allclose(orbits.filling_factor(density, np.array([-6.0, 6.0])), 4.0)


def test_landau_moment_is_the_derivative_of_the_partition_sum() -> None:
    """Moment and heat capacity from ln Z = ln(x / sinh x) by finite differences (Landau 1930)."""

    def log_z(x: float) -> float:
        return math.log(x / math.sinh(x))

    for x in (0.003, 0.02, 0.7, 4.0):
        h = 1e-4 * x
        slope = (log_z(x + h) - log_z(x - h)) / (2 * h)
        assert float(landau_moment(x)) == pytest.approx(slope, rel=1e-4, abs=1e-7)
        oscillator = (x / math.sinh(x)) ** 2
        assert float(landau_heat_capacity(x)) == pytest.approx(oscillator, rel=1e-9)
    assert float(landau_moment(0.0)) == 0.0
    assert float(landau_heat_capacity(0.0)) == 1.0
    assert float(landau_heat_capacity(1e6)) < 1e-200


def test_reduced_level_distance_is_half_the_level_distance_over_kt() -> None:
    """x = hbar omega_c / 2 k T; 1.34343 K/T for a free electron (CODATA)."""
    assert float(reduced_level_distance(2.0, 1.0, 1.0)) == pytest.approx(1.34343, rel=1e-5)


def test_thermal_wavelength_of_a_free_electron_at_room_temperature() -> None:
    """4.30 nm at 300 K (textbook value, from memory)."""
    assert orbits.thermal_wavelength_m(300.0, 1.0) == pytest.approx(4.303e-9, rel=1e-3)
