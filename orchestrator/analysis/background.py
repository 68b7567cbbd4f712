"""The smooth part of a sweep under its oscillations."""

import numpy as np
import numpy.typing as npt
from numpy.polynomial import chebyshev

FloatArray = npt.NDArray[np.float64]

BACKGROUND_ORDER = 6
"""Order of the polynomial in B; it can follow about three swings over the whole sweep."""


def background_basis(field_t: FloatArray, order: int = BACKGROUND_ORDER) -> FloatArray:
    """Orthonormal columns that span the polynomials in B up to an order.

    Parameters
    ----------
    field_t : array, shape (n,)
        Field of each sample in tesla.
    order : int
        Order of the polynomial.

    Returns
    -------
    array, shape (n, order + 1)
        Columns q with q.T @ q = 1, so that ``y - q @ (q.T @ y)`` is what is left of y.

    Notes
    -----
    Chebyshev polynomials on the sweep's own range, then a QR decomposition.
    """
    low, high = float(field_t.min()), float(field_t.max())
    scaled = (2 * field_t - low - high) / (high - low)
    return np.asarray(np.linalg.qr(chebyshev.chebvander(scaled, order))[0], dtype=np.float64)


def without_background(values: FloatArray, basis: FloatArray) -> FloatArray:
    """Values, shape (n,) or (n, k), less their least-squares projection on the basis."""
    return np.asarray(values - basis @ (basis.T @ values), dtype=np.float64)


def smooth_background(
    field_t: FloatArray, values: FloatArray, order: int = BACKGROUND_ORDER
) -> FloatArray:
    """Least-squares polynomial in B through the values, at the same points and in their unit."""
    basis = background_basis(field_t, order)
    return np.asarray(basis @ (basis.T @ values), dtype=np.float64)
