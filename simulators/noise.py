"""Seeded noise: a random stream per instrument, drawn in batches as single draws are slow."""

import zlib

import numpy as np
from numpy.typing import NDArray

_BATCH = 4096


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
