"""Seeded noise: a random stream per instrument, drawn in batches as single draws are slow.

And the densities of noise: Johnson's, Nyquist, Phys. Rev. 32, 110 (1928), and 1/f.
"""

import zlib

import numpy as np
from numpy.typing import NDArray
from scipy import constants

_BATCH = 4096


def johnson_v2_per_hz(resistance_ohm: float, temperature_k: float) -> float:
    """4 k T R, one-sided density of the noise of a resistance (Nyquist 1928), V^2/Hz."""
    return 4.0 * constants.k * temperature_k * resistance_ohm


def flicker(corner_hz: float, frequency_hz: float) -> float:
    """Power density at a frequency over the white one, 1 + corner / f."""
    return 1.0 + corner_hz / frequency_hz


class NoiseSource:
    """Standard normal numbers for one named instrument.

    Parameters
    ----------
    seed : int
        The world's seed, not negative.
    name : str
        What the stream belongs to. Streams of different names are independent, and adding an
        instrument leaves the streams of the others as they were.
    """

    def __init__(self, seed: int, name: str) -> None:
        self._generator = np.random.default_rng([seed, zlib.crc32(name.encode())])
        self._block: NDArray[np.float64] = np.empty(0)
        self._single: list[float] = []
        self._next = 0

    def take(self) -> float:
        """One draw."""
        if not self._single:
            self._single = self._generator.standard_normal(_BATCH // 8).tolist()
        return self._single.pop()

    def take_pairs(self, rows: int) -> NDArray[np.float64]:
        """Draws of shape ``(rows, 2)``; `rows` is small against the batch."""
        first = self._next
        if first + rows > len(self._block):
            self._block = self._generator.standard_normal((_BATCH // 2, 2))
            first = 0
        self._next = first + rows
        return self._block[first : self._next]
