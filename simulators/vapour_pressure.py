"""Temperature of liquid helium-4 from the pressure of its vapour, and back: ITS-90.

T/K = sum over i of A_i [(ln(p/Pa) - B) / C]^i, one set of numbers below the lambda point and one
above. Source: The International Temperature Scale of 1990, vapour-pressure equations (Preston-
Thomas, Metrologia 27, 3 (1990)); numbers from shared/standards.md, the paper itself was not read.
"""

import math

from scipy.optimize import brentq

TEMPERATURE_MIN_K = 1.25
LAMBDA_K = 2.1768
TEMPERATURE_MAX_K = 5.0

# fmt: off
_BELOW = (5.6, 2.9, (
    1.392408, 0.527153, 0.166756, 0.050988, 0.026514, 0.001975, -0.017976, 0.005409, 0.013259,
))
_ABOVE = (10.3, 1.9, (
    3.146631, 1.357655, 0.413923, 0.091159, 0.016349, 0.001826, -0.004325, -0.004973,
))
# fmt: on


def _branch_k(pressure_pa: float, branch: tuple[float, float, tuple[float, ...]]) -> float:
    b, c, coefficients = branch
    u = (math.log(pressure_pa) - b) / c
    total = 0.0
    for coefficient in reversed(coefficients):
        total = total * u + coefficient
    return total


def _inverse_pa(temperature_k: float, branch: tuple[float, float, tuple[float, ...]]) -> float:
    low_pa, high_pa = (100.0, 5.2e3) if branch is _BELOW else (4.8e3, 2.1e5)
    return float(brentq(lambda p: _branch_k(p, branch) - temperature_k, low_pa, high_pa, xtol=1e-9))


LAMBDA_PA = _inverse_pa(LAMBDA_K, _BELOW)
PRESSURE_MIN_PA = _inverse_pa(TEMPERATURE_MIN_K, _BELOW)
PRESSURE_MAX_PA = _inverse_pa(TEMPERATURE_MAX_K, _ABOVE)


def bath_k(pressure_pa: float) -> float:
    """Temperature of a helium-4 bath under its own vapour.

    Parameters
    ----------
    pressure_pa : float
        Vapour pressure, 114.7 Pa to 196 kPa.

    Returns
    -------
    float
        Kelvin, ITS-90, 1.25 to 5.0.

    Raises
    ------
    ValueError
        Outside the range of the scale.
    """
    if not PRESSURE_MIN_PA <= pressure_pa <= PRESSURE_MAX_PA:
        raise ValueError(
            f"vapour pressure of helium-4: {pressure_pa:g} Pa; allowed is "
            f"{PRESSURE_MIN_PA:.1f} to {PRESSURE_MAX_PA:.0f} Pa (ITS-90, 1.25 to 5.0 K)"
        )
    return _branch_k(pressure_pa, _BELOW if pressure_pa <= LAMBDA_PA else _ABOVE)


def vapour_pa(temperature_k: float) -> float:
    """Vapour pressure of helium-4, the inverse of `bath_k`.

    Parameters
    ----------
    temperature_k : float
        1.25 to 5.0.

    Returns
    -------
    float
        Pascal.

    Raises
    ------
    ValueError
        Outside the range of the scale.
    """
    if not TEMPERATURE_MIN_K <= temperature_k <= TEMPERATURE_MAX_K:
        raise ValueError(
            f"helium-4 vapour pressure at {temperature_k:g} K; allowed is 1.25 to 5.0 K (ITS-90)"
        )
    return _inverse_pa(temperature_k, _BELOW if temperature_k <= LAMBDA_K else _ABOVE)
