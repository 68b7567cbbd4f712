"""How uncertain a least-squares fit is when neighbouring samples share noise.

A lock-in's filter passes part of each sample's noise on to the next, so samples are fewer than they
look. The fit stays unbiased; its covariance is the "sandwich" of econometrics (W. K. Newey and
K. D. West, Econometrica 55, 703 (1987), here with the full stationary autocovariance).
"""

import itertools
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from orchestrator.physics import lockin

FloatArray = npt.NDArray[np.float64]

_MOST_LAGS = 12
_SEEN = 0.02  # correlations expected below this are left out


def correlation_lags(interval_s: float, time_constant_s: float, poles: int) -> int:
    """Number of sample intervals over which the filter correlates noise by more than 2 percent.

    At least 2, for what an instrument or a cable adds, and at most 12.
    """
    lags = 2
    while (
        lags < _MOST_LAGS
        and lockin.noise_correlation((lags + 1) * interval_s, time_constant_s, poles) > _SEEN
    ):
        lags += 1
    return lags


def lag_products(columns: FloatArray, starts: Sequence[int], lags: int) -> FloatArray:
    """Sums of each column times itself shifted by 0 to `lags` samples, within each stretch.

    Parameters
    ----------
    columns : array, shape (n, k)
        Orthonormal columns that a fit has used up.
    starts : sequence of int
        First row of each stretch, and n at the end.
    lags : int
        Largest lag.

    Returns
    -------
    array, shape (k, lags + 1)
    """
    result = np.zeros((columns.shape[1], lags + 1))
    for first, last in itertools.pairwise(starts):
        part = columns[first:last]
        for lag in range(lags + 1):
            result[:, lag] += np.sum(part[: part.shape[0] - lag] * part[lag:], axis=0)
    return result


def autocovariance(
    pieces: Sequence[FloatArray], lags: int, products: FloatArray | None = None
) -> FloatArray:
    """Autocovariance of noise at lags 0 to `lags` from a fit's residuals, pooled over stretches.

    Parameters
    ----------
    pieces : sequence of arrays
        Residuals of each sweep, in the same unit of noise.
    lags : int
        Largest lag.
    products : array, shape (k, lags + 1), optional
        `lag_products` of the orthonormal columns of the fit. What the fit took out of the noise
        along each column is put back: at lag 0 this is the count of degrees of freedom, and at
        other lags it has the same size.

    Returns
    -------
    array, shape (lags + 1,)
        Values are winsorised at 5 robust standard deviations, so that one spike does not decide.
    """
    together = np.concatenate(pieces)
    limit = 5 * float(np.median(np.abs(together))) / 0.6745
    clipped = [np.clip(piece, -limit, limit) for piece in pieces]
    raw, sizes = np.zeros(lags + 1), np.zeros(lags + 1)
    for lag in range(lags + 1):
        sizes[lag] = sum(p.size - lag for p in clipped)
        raw[lag] = sum(float(p[: p.size - lag] @ p[lag:]) for p in clipped) / sizes[lag]
    found = raw
    if products is not None:
        for _ in range(3):  # the noise along the columns is itself that of the result
            along = products[:, 0] * found[0] + 2 * products[:, 1:] @ found[1:]
            found = raw + np.maximum(along, 0.0) @ products / sizes
    return found


def sandwich_covariance(
    jacobian: FloatArray, starts: Sequence[int], covariance: FloatArray
) -> FloatArray:
    """Covariance of least-squares parameters under stationary noise within each stretch.

    Parameters
    ----------
    jacobian : array, shape (n, p)
        Derivatives of the model, stretches one below the other.
    starts : sequence of int
        First row of each stretch, and n at the end.
    covariance : array, shape (lags + 1,)
        Autocovariance of the noise.

    Returns
    -------
    array, shape (p, p)
        (J'J)^-1 J'RJ (J'J)^-1.

    Raises
    ------
    numpy.linalg.LinAlgError
        If the parameters cannot be told apart.
    """
    scale = np.sqrt(np.sum(jacobian**2, axis=0))
    if not np.all(scale > 0):
        raise np.linalg.LinAlgError("a parameter has no effect on the model")
    scaled = jacobian / scale
    normal = scaled.T @ scaled
    if np.linalg.cond(normal) > 1e12:
        raise np.linalg.LinAlgError("the parameters cannot be told apart")
    meat = covariance[0] * normal
    for lag in range(1, covariance.size):
        cross = np.zeros_like(normal)
        for first, last in itertools.pairwise(starts):
            cross += scaled[first : last - lag].T @ scaled[first + lag : last]
        meat = meat + covariance[lag] * (cross + cross.T)
    inverse = np.linalg.inv(normal)
    plain = covariance[0] * inverse
    result = np.asarray(inverse @ meat @ inverse, dtype=np.float64)
    # An estimated autocovariance need not be positive definite; never below a tenth of white noise.
    short = np.diag(result) < 0.1 * np.diag(plain)
    if np.any(short):
        result = plain
    return result / np.outer(scale, scale)
