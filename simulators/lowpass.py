"""The n-pole RC low-pass of a lock-in, exactly: H(f) = (1 + i 2 pi f tau)^-n.

Each pole is tau dx_k/dt = x_(k-1) - x_k. Over a step, the input is a cubic through four equally
spaced values, or several such pieces; the output is then exact, as one matrix on (state, values).
White noise through the same poles is stepped with its exact covariance, so that variance and
autocorrelation are right for any time between readings.
"""

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import cholesky, expm
from scipy.special import gammainc

Array = NDArray[np.float64]

NODES_PER_PIECE = 3
_INSTANT = 1e-12


@lru_cache(maxsize=512)
def response(order: int, step: float, pieces: int) -> tuple[Array, Array]:
    """How state and input values make the next state.

    Parameters
    ----------
    order : int
        Number of poles, 1 to 4.
    step : float
        Whole time step over tau.
    pieces : int
        How many cubics the input is made of.

    Returns
    -------
    tuple of array
        ``(m, w)`` of shapes ``(order, order)`` and ``(order, 3 * pieces + 1)``: the next state is
        ``m @ state + w @ values``; the last element of the state is the output.
    """
    h = step / pieces
    # The cubic on 0..1 as its own four-stage integrator: u, u', u'', u''' are states too.
    size = order + 4
    a = np.zeros((size, size))
    for k in range(order):
        a[k, k] = -h
        if k:
            a[k, k - 1] = h
    a[0, order] = h
    for k in range(3):
        a[order + k, order + k + 1] = 1.0
    grown = np.asarray(expm(a), dtype=np.float64)
    nodes = np.linspace(0.0, 1.0, NODES_PER_PIECE + 1)
    taylor = np.array([[s**k / math.factorial(k) for k in range(4)] for s in nodes])
    one_m = grown[:order, :order]
    one_w = grown[:order, order:] @ np.linalg.inv(taylor)
    m = np.eye(order)
    w = np.zeros((order, NODES_PER_PIECE * pieces + 1))
    for piece in range(pieces):
        m = one_m @ m
        w = one_m @ w
        first = NODES_PER_PIECE * piece
        w[:, first : first + NODES_PER_PIECE + 1] += one_w
    return m, w


@lru_cache(maxsize=512)
def noise_step(order: int, step: float) -> tuple[Array, Array]:
    """Exact step of the poles' state under white noise.

    Parameters
    ----------
    order : int
        Number of poles.
    step : float
        Time step over tau, greater than 0.

    Returns
    -------
    tuple of array
        ``(m, c)``, each ``(order, order)``: with z standard normal, ``m @ state + c @ z`` is the
        next state for an input of one-sided density 1 V/sqrt(Hz) and tau = 1 s. Scale by
        1/sqrt(tau).
    """
    m = np.array(
        [
            [
                math.exp(-step) * step ** (i - j) / math.factorial(i - j) if i >= j else 0.0
                for j in range(order)
            ]
            for i in range(order)
        ]
    )
    # Impulse responses v^i e^-v / i!; two-sided density 1/2; integrals are incomplete gammas.
    # Scaled by step^(i+1/2) before factoring: unscaled, a short step is singular to rounding.
    scale = np.array([step ** (i + 0.5) for i in range(order)])
    covariance = np.array(
        [
            [
                0.5 * math.comb(i + j, i) / 2.0 ** (i + j + 1) * gammainc(i + j + 1, 2 * step)
                for j in range(order)
            ]
            for i in range(order)
        ]
    )
    if step < _INSTANT:
        # The same to first order, as the powers are too small to divide by.
        scaled = [
            [0.5 * math.comb(i + j, i) / math.factorial(i + j + 1) for j in range(order)]
            for i in range(order)
        ]
        root = cholesky(np.array(scaled), lower=True) * scale[:, None]
    elif step < 1.0:
        root = cholesky(covariance / np.outer(scale, scale), lower=True) * scale[:, None]
    else:
        root = cholesky(covariance, lower=True)
    return m, np.asarray(root, dtype=np.float64)


def stationary_noise(order: int) -> Array:
    """Cholesky factor of the state's covariance after a long time, scaled as in `noise_step`."""
    return noise_step(order, 200.0)[1]


def decayed(state: list[complex], step: float) -> list[complex]:
    """State of the poles after a time in which nothing comes in.

    Parameters
    ----------
    state : list of complex
        One value for each pole, the output last.
    step : float
        Time over tau.

    Returns
    -------
    list of complex
        ``sum_j exp(-step) step^(i-j) / (i-j)! state[j]``, pole by pole.
    """
    weight, weights = math.exp(-step), []
    for k in range(len(state)):
        weights.append(weight)
        weight *= step / (k + 1)
    return [sum(weights[i - j] * state[j] for j in range(i + 1)) for i in range(len(state))]
