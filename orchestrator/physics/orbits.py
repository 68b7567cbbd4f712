"""Orbits: what a frequency in 1/B says about the Fermi surface, and the period it has in field.

Masses are multiples of the electron mass; everything else is SI.
"""

import math

import numpy as np
import numpy.typing as npt
from scipy import constants

FloatArray = npt.NDArray[np.float64]

VON_KLITZING_OHM: float = constants.h / constants.e**2
"""h / e^2, exact in the SI since 2019."""

CYCLOTRON_K_PER_T: float = constants.hbar * constants.e / (constants.m_e * constants.k)
"""hbar e / (m_e k_B): cyclotron energy of a free electron in kelvin per tesla."""


def onsager_area_per_m2(frequency_t: float) -> float:
    """Extremal area of the Fermi surface in m^-2: A = 2 pi e F / hbar.

    Source: L. Onsager, Phil. Mag. 43, 1006 (1952); Shoenberg (1984). `frequency_t` in tesla.
    """
    return 2 * math.pi * constants.e * frequency_t / constants.hbar


def onsager_frequency_t(area_per_m2: float) -> float:
    """Frequency in tesla of an extremal area in m^-2: F = hbar A / (2 pi e)."""
    return constants.hbar * area_per_m2 / (2 * math.pi * constants.e)


def _check_degeneracy(degeneracy: int) -> None:
    if degeneracy < 1:
        raise ValueError(f"degeneracy: {degeneracy!r}, allowed: 1 or more (spin times valley)")


def density_2d_m2(frequency_t: float, degeneracy: int = 2) -> float:
    """Carrier density per m^2 of a two-dimensional gas from its frequency, n = g e F / h.

    Parameters
    ----------
    frequency_t : float
        Frequency in tesla.
    degeneracy : int
        g, spin times valley degeneracy.

    Raises
    ------
    ValueError
        If the degeneracy is below 1.

    Notes
    -----
    A Landau level holds e B / h carriers per area and degenerate state; Coleridge et al. (1989).
    """
    _check_degeneracy(degeneracy)
    return degeneracy * constants.e * frequency_t / constants.h


def frequency_of_density_2d_t(density_m2: float, degeneracy: int = 2) -> float:
    """Frequency in tesla of a two-dimensional density per m^2, F = n h / (g e).

    Raises
    ------
    ValueError
        If the degeneracy is below 1.
    """
    _check_degeneracy(degeneracy)
    return density_m2 * constants.h / (degeneracy * constants.e)


def filling_factor(density_m2: float, field_t: float | FloatArray) -> float | FloatArray:
    """Filled Landau levels counted with their degeneracy, nu = n h / (e |B|).

    `density_m2` per m^2, `field_t` in tesla and not 0; the result has the shape of the field.
    """
    filling = density_m2 * constants.h / (constants.e * np.abs(np.asarray(field_t, np.float64)))
    return float(filling) if filling.ndim == 0 else filling


def local_period_t(field_t: float, frequency_t: float) -> float:
    """Distance in tesla between neighbouring maxima near a field, to first order B^2 / F."""
    return field_t**2 / frequency_t


def period_below_t(field_t: float, frequency_t: float) -> float:
    """Exact distance in tesla down to the next point of equal phase 2 pi F / B: B^2 / (F + B)."""
    size = abs(field_t)
    return size**2 / (frequency_t + size)


def period_above_t(field_t: float, frequency_t: float) -> float:
    """Exact distance in tesla up to the next point of equal phase: B^2 / (F - B).

    Infinite from B = F on, where less than one period is left.
    """
    size = abs(field_t)
    return size**2 / (frequency_t - size) if size < frequency_t else math.inf


def cyclotron_energy_j(field_t: float, mass: float) -> float:
    """Distance of Landau levels in joules, hbar e |B| / m."""
    return constants.hbar * constants.e * abs(field_t) / (mass * constants.m_e)


def fermi_energy_j(frequency_t: float, mass: float) -> float:
    """Fermi energy in joules of a parabolic band with this frequency, hbar e F / m.

    From A_F = pi k_F^2 and E_F = (hbar k_F)^2 / 2m; an estimate for any other band.
    """
    return constants.hbar * constants.e * frequency_t / (mass * constants.m_e)


def thermal_wavelength_m(temperature_k: float, mass: float) -> float:
    """Thermal de Broglie wavelength in metres, h / sqrt(2 pi m k_B T).

    Degenerate carriers need it well above their spacing, n^(-1/2) in two dimensions.
    """
    return constants.h / math.sqrt(2 * math.pi * mass * constants.m_e * constants.k * temperature_k)
