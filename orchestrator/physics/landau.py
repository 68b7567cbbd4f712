"""Landau levels without a Fermi surface: magnetisation and heat capacity of a dilute hot gas.

x = hbar omega_c / (2 k_B T). Source: L. Landau, Z. Phys. 64, 629 (1930).
"""

import numpy as np
import numpy.typing as npt
from scipy import constants

FloatArray = npt.NDArray[np.float64]

_SMALL = 1e-2
_LARGE = 300.0


def reduced_level_distance(
    field_t: float | FloatArray, temperature_k: float | FloatArray, mass: float
) -> FloatArray:
    """x = hbar e |B| / (2 m k_B T), for field in tesla, temperature in kelvin, mass in m_e."""
    scale = constants.hbar * constants.e / (2 * mass * constants.m_e * constants.k)
    return np.asarray(scale * np.abs(field_t) / np.asarray(temperature_k, dtype=np.float64))


def landau_moment(reduced_distance: float | FloatArray) -> FloatArray:
    """Orbital moment per electron in units of e hbar / 2m, 1/x - coth x, negative for x > 0.

    Goes to 0 as x goes to 0: classical carriers have no magnetisation (Bohr, van Leeuwen).
    """
    x = np.asarray(reduced_distance, dtype=np.float64)
    series = -x / 3 + x**3 / 45 - 2 * x**5 / 945
    safe = np.where(x > _SMALL, x, 1.0)
    return np.where(x > _SMALL, 1 / safe - 1 / np.tanh(safe), series)


def landau_heat_capacity(reduced_distance: float | FloatArray) -> FloatArray:
    """Heat capacity per electron of the same levels in units of k_B, x^2 / sinh^2 x."""
    x = np.clip(np.asarray(reduced_distance, dtype=np.float64), 0.0, _LARGE)
    safe = np.where(x > _SMALL, x, 1.0)
    return np.where(x > _SMALL, (safe / np.sinh(safe)) ** 2, 1 - x**2 / 3 + x**4 / 15)
