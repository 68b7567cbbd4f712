"""Spectra in 1/B of unevenly spaced samples, fast: sums of exp(-i 2 pi F / B) by gridding and FFT.

The amplitude spectrum is the least-squares one with a floating mean and weights: M. Zechmeister
and M. Kuerster, Astron. Astrophys. 496, 577 (2009), after Lomb (1976) and Scargle (1982). The fast
sums spread each sample as a Gaussian on a fine grid, after A. Dutt and V. Rokhlin, SIAM J. Sci.
Comput. 14, 1368 (1993) and L. Greengard and J.-Y. Lee, SIAM Rev. 46, 443 (2004).
"""

import itertools
import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import fft

FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]

_HALF_WIDTH = 8  # grid cells on each side of a sample; leaves an error of about 1e-7


def fourier_sum(position: FloatArray, values: FloatArray, step: float, count: int) -> ComplexArray:
    """Sums over samples of value * exp(-i 2 pi k step position), for k = 0 to count - 1.

    Parameters
    ----------
    position : array, shape (n,)
        Positions in the inverse unit of the step; here 1/B in 1/T, step in T.
    values : array, shape (n,)
        Real values.
    step : float
        Distance of the frequencies.
    count : int
        Number of frequencies, from 0 upwards.

    Returns
    -------
    complex array, shape (count,)
        Accurate to about 1e-6 of the sum of absolute values.

    Notes
    -----
    Costs n * 16 + M log M operations with M about 4 * count, in place of n * count.
    """
    size = fft.next_fast_len(max(4 * count, 4 * _HALF_WIDTH), real=True)
    cycles = np.remainder(position * step, 1.0) * size
    nearest = np.rint(cycles).astype(np.int64)
    # Width chosen so that the aliases of the grid's spectrum and the cut-off tails are alike.
    ratio = size / (2 * count)
    variance = _HALF_WIDTH * (2 * ratio) / (2 * math.pi * (2 * ratio - 1))
    offset = nearest - cycles
    reach = np.arange(-_HALF_WIDTH, _HALF_WIDTH + 1)
    kernel = np.exp(-((offset[:, None] + reach) ** 2) / (2 * variance))
    cells = (nearest[:, None] + reach) % size
    grid = np.bincount(cells.ravel(), weights=(kernel * values[:, None]).ravel(), minlength=size)
    transformed = np.asarray(fft.rfft(grid), dtype=np.complex128)[:count]
    wave = 2 * math.pi * np.arange(count) / size
    return transformed * np.exp(variance * wave**2 / 2) / math.sqrt(2 * math.pi * variance)


@dataclass(frozen=True)
class Spectrum:
    """Amplitudes over frequency: `frequency_t` in tesla, `amplitude` in the values' unit,
    `power` the part of the weighted variance explained, 0 to 1."""

    frequency_t: FloatArray
    amplitude: FloatArray
    power: FloatArray


def amplitude_spectrum(
    inverse_field_per_t: FloatArray,
    values: FloatArray,
    step_t: float,
    count: int,
    weights: FloatArray | None = None,
) -> Spectrum:
    """Least-squares amplitude of a sine with floating mean at step, 2 step, ..., count * step.

    Parameters
    ----------
    inverse_field_per_t : array, shape (n,)
        1/B of each sample.
    values : array, shape (n,)
        The residual, in any unit.
    step_t : float
        Distance of the frequencies in tesla.
    count : int
        Number of frequencies.
    weights : array, shape (n,), optional
        Weights, such as 1 / variance; equal where left out.

    Returns
    -------
    Spectrum
        Without the frequency 0.

    Notes
    -----
    Zechmeister and Kuerster (2009), equations 4 to 15.
    """
    weight = np.ones(values.shape) if weights is None else weights
    weight = weight / weight.sum()
    centred = values - weight @ values
    at_y = fourier_sum(inverse_field_per_t, weight * centred, step_t, count + 1)[1:]
    at_w = fourier_sum(inverse_field_per_t, weight, step_t, 2 * count + 1)
    single, double = at_w[1 : count + 1], at_w[2 : 2 * count + 1 : 2]
    c, s = single.real, -single.imag
    yc, ys = at_y.real, -at_y.imag
    cc = 0.5 * (1 + double.real) - c**2
    ss = 0.5 * (1 - double.real) - s**2
    cs = -0.5 * double.imag - c * s
    determinant = np.maximum(cc * ss - cs**2, 1e-12)
    a = (yc * ss - ys * cs) / determinant
    b = (ys * cc - yc * cs) / determinant
    total = float(weight @ centred**2)
    power = (a * yc + b * ys) / total if total > 0 else np.zeros(count)
    frequency = np.asarray(step_t * np.arange(1, count + 1), dtype=np.float64)
    return Spectrum(frequency, np.hypot(a, b), np.clip(power, 0.0, 1.0))


def noise_floor(power: FloatArray, least_bins: int) -> FloatArray:
    """Mean power of the noise along a spectrum, from medians over blocks that widen with frequency.

    Parameters
    ----------
    power : array, shape (n,)
        Squared amplitudes at evenly spaced frequencies, from low to high.
    least_bins : int
        Smallest width of a block.

    Returns
    -------
    array, shape (n,)
        The squared amplitude of pure noise has an exponential distribution, whose median is
        ln 2 times its mean; narrow peaks hardly move a median.
    """
    edges = [0]
    while edges[-1] < power.size:
        edges.append(edges[-1] + max(least_bins, int(0.35 * edges[-1])))
    if len(edges) > 2 and edges[-1] > power.size:
        edges.pop()
    edges[-1] = power.size
    centres = [0.5 * (a + b) for a, b in itertools.pairwise(edges)]
    medians = [float(np.median(power[a:b])) for a, b in itertools.pairwise(edges)]
    return np.asarray(np.interp(np.arange(power.size), centres, medians) / math.log(2))


def false_alarm(ratio: float, trials: float, floor_bins: float) -> float:
    """Probability that noise alone reaches this ratio of power to floor in any of the trials.

    Parameters
    ----------
    ratio : float
        Power over the noise floor.
    trials : float
        Number of independent frequencies searched.
    floor_bins : float
        Number of independent frequencies that the floor was taken from.

    Notes
    -----
    Exponential distribution with an estimated mean: (1 + ratio / k)^-k for one trial.
    """
    one = -floor_bins * math.log1p(ratio / floor_bins)
    return float(-math.expm1(-trials * math.exp(one)))


def ratio_for_false_alarm(chance: float, trials: float, floor_bins: float) -> float:
    """The ratio of power to floor at which `false_alarm` is this small; its inverse."""
    one = -math.log1p(-chance) / trials
    return float(floor_bins * math.expm1(-math.log(one) / floor_bins))
