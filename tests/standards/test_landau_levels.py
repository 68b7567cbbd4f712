"""A two-dimensional gas against Landau levels, the quantum Hall effect and small oscillations."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import constants

from orchestrator.physics.lifshitz_kosevich import dingle_factor, thermal_factor
from simulators.landau import Gas, GasParameters, GasTable

R_K_OHM = 25812.80745  # h/e^2, exact in the SI of 2019
CLEAN = GasParameters(density_m2=3.0e15, mass=0.067, dingle_k=0.5, resistance_ohm=20.0)
WIDE = GasParameters(density_m2=6.0e15, mass=0.067, dingle_k=6.0, resistance_ohm=20.0)
TABLE = GasTable(replace(CLEAN, coldest_k=0.1))


def at(parameters: GasParameters, field_t: float, kelvin: float) -> tuple[float, float]:
    xx, xy = Gas(parameters).resistivity_ohm(np.array([field_t]), np.array([kelvin]))
    return float(xx[0]), float(xy[0])


def test_a_level_holds_e_b_over_h_of_each_spin() -> None:
    """Filling nu = n h/(e B) counts levels of density e B/h: textbook; constants of CODATA."""
    assert constants.e / constants.h == pytest.approx(2.417989e14, rel=1e-6)
    field_t = 4.0
    filled = CLEAN.density_m2 / (constants.e * field_t / constants.h)
    assert filled == pytest.approx(2 * CLEAN.frequency_t / field_t)


def test_frequency_of_the_textbook_gas() -> None:
    """n = 1.57e15 m^-2 and g = 2 give F = 3.2465 T (n = g e F/h)."""
    assert GasParameters(1.57e15, 0.067, 1.0, 10.0).frequency_t == pytest.approx(3.2465, abs=1e-4)


@pytest.mark.parametrize("level", [1, 2, 3])
def test_plateaus_stand_at_r_k_over_nu_where_levels_are_filled(level: int) -> None:
    """von Klitzing, Dorda & Pepper 1980; R_K from the exact SI value."""
    nu = CLEAN.degeneracy * level
    field_t = CLEAN.density_m2 * constants.h / (constants.e * nu)
    for off in (-0.03, 0.0, 0.03):
        assert at(CLEAN, field_t * (1 + off), 0.3)[1] == pytest.approx(R_K_OHM / nu, rel=1e-4)
    assert at(CLEAN, field_t, 0.3)[0] < 1e-3 * CLEAN.resistance_ohm


def test_half_filled_levels_conduct_and_the_hall_line_is_classical_there() -> None:
    field_t = CLEAN.frequency_t / 1.5
    xx, xy = at(CLEAN, field_t, 0.3)
    assert xx > 3 * CLEAN.resistance_ohm
    assert xy == pytest.approx(field_t / (CLEAN.density_m2 * constants.e), rel=1e-3)


def test_small_oscillations_are_those_of_coleridge_stoner_and_fletcher() -> None:
    """Drho/rho0 = 4 R_T R_D cos(2 pi F/B - pi), Phys. Rev. B 39, 1120 (1989); where it is small."""
    field_t = 1 / np.linspace(1 / 1.2, 1 / 1.0, 400)
    kelvin = np.full_like(field_t, 1.5)
    xx, xy = Gas(WIDE).resistivity_ohm(field_t, kelvin)
    factor = np.asarray(
        thermal_factor(field_t, 1.5, WIDE.mass) * dingle_factor(field_t, WIDE.dingle_k, WIDE.mass)
    )
    expected = 4 * factor * np.cos(2 * math.pi * WIDE.frequency_t / field_t - math.pi)
    assert np.max(np.abs(expected)) < 0.025
    found = xx / WIDE.resistance_ohm - 1
    assert np.max(np.abs(found - expected)) < 0.03 * np.max(np.abs(expected))
    assert xy == pytest.approx(field_t / (WIDE.density_m2 * constants.e), rel=1e-3)


@pytest.mark.parametrize("kelvin", [1.0, 10.0, 60.0])
def test_the_chemical_potential_goes_to_that_of_no_field(kelvin: float) -> None:
    """mu = k T ln(exp(n/(D k T)) - 1), D = g m/(2 pi hbar^2): textbook, two dimensions."""
    p = CLEAN
    states = p.degeneracy * p.mass * constants.m_e / (2 * math.pi * constants.hbar**2)
    fermi_k = p.density_m2 / (states * constants.k)
    closed_k = kelvin * math.log(math.expm1(fermi_k / kelvin))
    found = Gas(p).chemical_potential_k(np.array([0.02]), np.array([kelvin]))
    assert float(found[0]) == pytest.approx(closed_k, rel=1e-6)


def test_at_constant_density_the_chemical_potential_follows_the_levels() -> None:
    """It stays within a level while that fills, and jumps by hbar w_c at integer filling."""
    gas = Gas(replace(CLEAN, dingle_k=0.005))
    kelvin = np.array([0.1])
    at_two = CLEAN.frequency_t / 2
    below, above = (
        gas.chemical_potential_k(np.array([at_two * (1 + off)]), kelvin) for off in (-0.05, 0.05)
    )
    spacing_k = float(gas.spacing_k(np.array([at_two]))[0])
    # Above the field the second level is the last, below it the third has begun: their centres.
    jump_k = (2.5 * 0.95 - 1.5 * 1.05) * spacing_k
    assert float((below - above)[0]) == pytest.approx(jump_k, rel=0.05)


def test_the_density_is_kept_when_it_is_counted_over_the_levels() -> None:
    """A direct sum over broadened levels and the Fermi function, apart from Poisson's sum."""
    p, field_t, kelvin = CLEAN, 1.7, 1.2
    gas = Gas(p)
    mu_k = float(gas.chemical_potential_k(np.array([field_t]), np.array([kelvin]))[0])
    spacing_k = float(gas.spacing_k(np.array([field_t]))[0])
    width_k = math.sqrt(spacing_k * p.dingle_k)
    energy_k = np.linspace(-5 * width_k, mu_k + 60 * kelvin, 400_001)
    occupied = 1 / (1 + np.exp((energy_k - mu_k) / kelvin))
    total = 0.0
    for level in range(int(mu_k / spacing_k) + 12):
        centre = spacing_k * (level + 0.5)
        shape = np.exp(-((energy_k - centre) ** 2) / (2 * width_k**2))
        shape /= math.sqrt(2 * math.pi) * width_k
        total += float(np.trapezoid(shape * occupied, energy_k))
    counted = total * p.degeneracy * constants.e * field_t / constants.h
    assert counted == pytest.approx(p.density_m2, rel=1e-6)


def test_the_table_follows_the_formulas() -> None:
    """To 3e-4 of the largest value, at fields and temperatures between its points."""
    random = np.random.default_rng(4)
    table, gas = TABLE, Gas(CLEAN)
    field_t = 1 / random.uniform(1 / 12.0, 1 / 0.6, 500)
    kelvin = np.exp(random.uniform(math.log(0.1), math.log(20.0), 500))
    xx, xy = gas.resistivity_ohm(field_t, kelvin)
    assert np.max(np.abs(table.longitudinal_ohms(field_t, kelvin) - xx)) < 3e-4 * np.max(xx)
    assert np.max(np.abs(table.hall_ohms(field_t, kelvin) - xy)) < 3e-4 * np.max(xy)
    assert table.longitudinal_ohms(-field_t, kelvin) == pytest.approx(
        table.longitudinal_ohms(field_t, kelvin)
    )
    assert table.hall_ohms(-field_t, kelvin) == pytest.approx(-table.hall_ohms(field_t, kelvin))


def test_near_zero_field_it_is_classical() -> None:
    table = TABLE
    low, cold = np.array([0.0, 0.01, -0.05]), np.full(3, 1.0)
    assert table.longitudinal_ohms(low, cold) == pytest.approx([20.0] * 3, rel=1e-7)
    assert table.hall_ohms(low, cold) == pytest.approx(low / (3.0e15 * constants.e))
