"""Damping of quantum oscillations: temperature, scattering, spin, and the oscillation itself.

Sources: I. M. Lifshitz and A. M. Kosevich, Sov. Phys. JETP 2, 636 (1956); R. B. Dingle, Proc. R.
Soc. A 211, 517 (1952); D. Shoenberg, Magnetic Oscillations in Metals (1984). Masses are multiples
of the electron mass, fields in tesla (their sign does not matter), temperatures in kelvin.
"""

import math
from typing import overload

import numpy as np
import numpy.typing as npt
from scipy import constants

FloatArray = npt.NDArray[np.float64]

DAMPING_T_PER_K: float = (
    2 * math.pi**2 * constants.k * constants.m_e / (constants.hbar * constants.e)
)
"""2 pi^2 k_B m_e / (hbar e): field scale of damping per kelvin and electron mass, 14.693 T/K."""

_LARGEST_EXPONENT = 800.0  # exp(-800) is 0 in double precision, and 800 is finite


def _exponent(
    field_t: float | FloatArray, temperature_k: float | FloatArray, mass: float, harmonic: int
) -> FloatArray:
    """2 pi^2 p k_B T m / (hbar e |B|), limited where its exponential is already zero."""
    field = np.abs(np.asarray(field_t, dtype=np.float64))
    scale = np.asarray(DAMPING_T_PER_K * harmonic * mass * np.asarray(temperature_k, np.float64))
    field, scale = np.broadcast_arrays(field, scale)
    exponent = np.where(scale > 0, _LARGEST_EXPONENT, 0.0)
    reached = scale < _LARGEST_EXPONENT * field  # so that a tiny field cannot overflow
    np.divide(scale, field, out=exponent, where=reached)
    exponent[np.isnan(field) | np.isnan(scale)] = np.nan
    return exponent


@overload
def thermal_factor(
    field_t: float, temperature_k: float, mass: float, harmonic: int = 1
) -> float: ...
@overload
def thermal_factor(
    field_t: FloatArray, temperature_k: float | FloatArray, mass: float, harmonic: int = 1
) -> FloatArray: ...
@overload
def thermal_factor(
    field_t: float, temperature_k: FloatArray, mass: float, harmonic: int = 1
) -> FloatArray: ...
def thermal_factor(
    field_t: float | FloatArray,
    temperature_k: float | FloatArray,
    mass: float,
    harmonic: int = 1,
) -> float | FloatArray:
    """Damping by temperature, R_T = X / sinh X with X = 2 pi^2 p k_B T m / (hbar e B).

    Parameters
    ----------
    field_t : float or array
        Magnetic field in tesla; broadcasts against the temperature.
    temperature_k : float or array
        Temperature in kelvin, not negative.
    mass : float
        Cyclotron mass in electron masses, not negative.
    harmonic : int
        Harmonic p, from 1.

    Returns
    -------
    float or array
        Between 0 and 1; exactly 1 as X goes to 0, and 0 as the field goes to 0.

    Notes
    -----
    Lifshitz and Kosevich (1956); Shoenberg (1984), section 2.3.
    """
    exponent = _exponent(field_t, temperature_k, mass, harmonic)
    # X / sinh X = 2 X e^-X / (1 - e^-2X), which neither overflows nor cancels.
    factor = np.ones_like(exponent)
    np.divide(
        2 * exponent * np.exp(-exponent), -np.expm1(-2 * exponent), out=factor, where=exponent > 0
    )
    factor[np.isnan(exponent)] = np.nan
    return float(factor) if factor.ndim == 0 else factor


@overload
def dingle_factor(field_t: float, dingle_k: float, mass: float, harmonic: int = 1) -> float: ...
@overload
def dingle_factor(
    field_t: FloatArray, dingle_k: float, mass: float, harmonic: int = 1
) -> FloatArray: ...
def dingle_factor(
    field_t: float | FloatArray, dingle_k: float, mass: float, harmonic: int = 1
) -> float | FloatArray:
    """Damping by scattering, R_D = exp(-2 pi^2 p k_B T_D m / (hbar e B)).

    Parameters
    ----------
    field_t : float or array
        Magnetic field in tesla.
    dingle_k : float
        Dingle temperature in kelvin, not negative.
    mass : float
        Cyclotron mass in electron masses.
    harmonic : int
        Harmonic p, from 1.

    Returns
    -------
    float or array
        Between 0 and 1, of the shape of the field; 0 as the field goes to 0.

    Notes
    -----
    Dingle (1952); Shoenberg (1984), section 2.3.
    """
    factor = np.exp(-_exponent(field_t, dingle_k, mass, harmonic))
    return float(factor) if factor.ndim == 0 else factor


def spin_factor(g_factor: float, mass: float, harmonic: int = 1) -> float:
    """Interference of the two spin directions, R_S = cos(pi p g m / 2), signed.

    Source: Shoenberg (1984), section 2.3. `mass` in electron masses.
    """
    return math.cos(math.pi * harmonic * g_factor * mass / 2)


def dingle_from_quantum_lifetime(lifetime_s: float) -> float:
    """Dingle temperature in kelvin of a quantum lifetime in seconds, hbar / (2 pi k_B tau_q).

    Raises
    ------
    ValueError
        If the lifetime is not positive.

    Notes
    -----
    Shoenberg (1984). The relation is its own inverse: see `quantum_lifetime_from_dingle`.
    """
    if not lifetime_s > 0:
        raise ValueError(f"quantum lifetime: {lifetime_s!r} s, allowed: above 0 s")
    return constants.hbar / (2 * math.pi * constants.k * lifetime_s)


def quantum_lifetime_from_dingle(dingle_k: float) -> float:
    """Quantum lifetime in seconds of a Dingle temperature in kelvin, hbar / (2 pi k_B T_D).

    Raises
    ------
    ValueError
        If the Dingle temperature is not positive.
    """
    if not dingle_k > 0:
        raise ValueError(f"Dingle temperature: {dingle_k!r} K, allowed: above 0 K")
    return constants.hbar / (2 * math.pi * constants.k * dingle_k)


def oscillation(
    field_t: float | FloatArray,
    temperature_k: float | FloatArray,
    frequency_t: float,
    mass: float,
    dingle_k: float,
    *,
    amplitude: float = 1.0,
    beta_cycles: float = 0.0,
    harmonics: int = 1,
    g_factor: float | None = None,
) -> FloatArray:
    """One orbit's oscillation, the sum over harmonics of amplitude R_T R_D R_S cos(phase).

    The phase of harmonic p is 2 pi p (F/B - 1/2 + beta); all harmonics have the same amplitude
    before damping, as for the resistance of a two-dimensional gas.

    Parameters
    ----------
    field_t : float or array
        Magnetic field in tesla; where it is 0 the oscillation is 0.
    temperature_k : float or array
        Temperature in kelvin, broadcasting against the field.
    frequency_t : float
        Frequency F in tesla.
    mass : float
        Cyclotron mass in electron masses.
    dingle_k : float
        Dingle temperature in kelvin.
    amplitude : float
        Amplitude before damping, in any unit; the result has the same.
    beta_cycles : float
        Phase offset beta, in cycles.
    harmonics : int
        Number of harmonics, from 1.
    g_factor : float, optional
        Electron g factor for the spin factor; left out, R_S is 1.

    Returns
    -------
    array
        Of the broadcast shape of field and temperature.

    Notes
    -----
    Lifshitz and Kosevich (1956); for two dimensions P. T. Coleridge, R. Stoner and R. Fletcher,
    Phys. Rev. B 39, 1120 (1989), where amplitude = 4 rho_0.
    """
    field = np.abs(np.asarray(field_t, dtype=np.float64))
    field, temperature = np.broadcast_arrays(field, np.asarray(temperature_k, dtype=np.float64))
    safe = np.where(field > 0, field, np.inf)
    cycles = frequency_t / safe - 0.5 + beta_cycles
    total = np.zeros(field.shape)
    for harmonic in range(1, harmonics + 1):
        damping = thermal_factor(field, temperature, mass, harmonic) * np.asarray(
            dingle_factor(field, dingle_k, mass, harmonic)
        )
        spin = 1.0 if g_factor is None else spin_factor(g_factor, mass, harmonic)
        total += spin * damping * np.cos(2 * math.pi * harmonic * cycles)
    return np.where(field > 0, amplitude * total, 0.0)
