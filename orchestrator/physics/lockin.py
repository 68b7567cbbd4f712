"""The low-pass filter at a lock-in's output: n equal RC poles, its lag, noise and settling.

H(f) = (1 + i 2 pi f tau)^-n, with f measured from the reference frequency. Linear systems theory.
"""

import math

import numpy as np
import numpy.typing as npt
from scipy import constants, special

FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]

MOST_POLES = 8


def _check(time_constant_s: float, poles: int) -> None:
    if not 0 <= time_constant_s < math.inf:
        raise ValueError(f"time constant: {time_constant_s!r} s, allowed: 0 s and above")
    if not 1 <= poles <= MOST_POLES:
        raise ValueError(f"filter poles: {poles!r}, allowed: 1 to {MOST_POLES}")


def filter_response(
    frequency_hz: float | FloatArray, time_constant_s: float, poles: int
) -> ComplexArray:
    """Complex response (1 + i 2 pi f tau)^-n; its absolute value is the surviving amplitude.

    Parameters
    ----------
    frequency_hz : float or array
        Frequency of the change at the output, in hertz, any sign.
    time_constant_s : float
        Time constant tau of each pole in seconds.
    poles : int
        Number of poles n.

    Returns
    -------
    complex array
        Of the shape of the frequency; 1 at 0 Hz.

    Raises
    ------
    ValueError
        If the time constant is negative or the number of poles is outside 1 to 8.
    """
    _check(time_constant_s, poles)
    turn = 2j * math.pi * time_constant_s * np.asarray(frequency_hz, dtype=np.float64)
    return np.asarray((1 + turn) ** -poles, dtype=np.complex128)


def enbw_hz(time_constant_s: float, poles: int) -> float:
    """Equivalent noise bandwidth in hertz: the integral of |H(f)|^2 over positive f.

    1/4 tau, 1/8 tau, 3/32 tau and 5/64 tau for one to four poles; infinite without a filter.
    """
    _check(time_constant_s, poles)
    if time_constant_s == 0:
        return math.inf
    shape: float = special.gamma(poles - 0.5) / special.gamma(poles)
    return float(shape / (4 * math.sqrt(math.pi) * time_constant_s))


def settle_time_s(fraction: float, time_constant_s: float, poles: int) -> float:
    """Time in seconds after a step until this fraction of it is reached, such as 0.99.

    The step response is the distribution function of the Erlang distribution of shape n and
    scale tau.

    Raises
    ------
    ValueError
        If the fraction is not between 0 and 1.
    """
    _check(time_constant_s, poles)
    if not 0 <= fraction < 1:
        raise ValueError(f"settled fraction: {fraction!r}, allowed: 0 up to but not 1")
    return float(time_constant_s * special.gammaincinv(poles, fraction))


def lag_s(time_constant_s: float, poles: int) -> float:
    """Delay in seconds of a slowly changing signal, n tau."""
    _check(time_constant_s, poles)
    return poles * time_constant_s


def noise_correlation(interval_s: float, time_constant_s: float, poles: int) -> float:
    """Correlation, 0 to 1, of two samples of filtered white noise taken an interval apart.

    The autocorrelation of n poles is that of |H|^2, which is (with z = interval / tau)
    proportional to z^(n-1/2) K_(n-1/2)(z), the Matern form; exp(-z) for one pole.
    """
    _check(time_constant_s, poles)
    if interval_s == 0:
        return 1.0
    if time_constant_s == 0:
        return 0.0
    z = abs(interval_s) / time_constant_s
    order = poles - 0.5
    norm = 2 ** (1 - order) / special.gamma(order)
    return float(norm * z**order * special.kv(order, z))


def frequency_met_hz(field_t: float, rate_t_per_s: float, frequency_t: float) -> float:
    """Frequency in hertz at which a sweep meets an oscillation, F |dB/dt| / B^2."""
    return abs(rate_t_per_s) * frequency_t / field_t**2


def rate_for_filter_loss(
    field_t: float, frequency_t: float, time_constant_s: float, poles: int, loss: float
) -> float:
    """Largest ramp rate in T/s at which the filter takes no more than a fraction of the amplitude.

    Parameters
    ----------
    field_t : float
        Magnetic field in tesla.
    frequency_t : float
        Oscillation frequency F in tesla, above 0.
    time_constant_s : float
        Time constant in seconds; 0 for no filter.
    poles : int
        Number of poles n.
    loss : float
        Allowed loss of amplitude, above 0 and below 1.

    Returns
    -------
    float
        Rate in T/s; infinite without a filter.

    Raises
    ------
    ValueError
        If the loss or the frequency is out of range.

    Notes
    -----
    |H| >= 1 - loss holds for 2 pi f tau <= sqrt((1 - loss)^(-2/n) - 1), with f = F (dB/dt) / B^2.
    """
    _check(time_constant_s, poles)
    if not 0 < loss < 1:
        raise ValueError(f"filter loss: {loss!r}, allowed: between 0 and 1")
    if not frequency_t > 0:
        raise ValueError(f"oscillation frequency: {frequency_t!r} T, allowed: above 0 T")
    if time_constant_s == 0:
        return math.inf
    turn = math.sqrt((1 - loss) ** (-2 / poles) - 1)
    return turn * field_t**2 / (2 * math.pi * time_constant_s * frequency_t)


def johnson_noise_v_per_rthz(resistance_ohm: float, temperature_k: float) -> float:
    """Thermal noise of a resistor in V per root hertz, sqrt(4 k_B T R).

    Source: H. Nyquist, Phys. Rev. 32, 110 (1928).
    """
    return math.sqrt(4 * constants.k * temperature_k * resistance_ohm)
