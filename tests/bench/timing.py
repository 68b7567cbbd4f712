"""Times of several ways to do the same, taken in turn so that a busy moment hits them all."""

import statistics
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Spent:
    """Median time of one piece of work, and the half-width of the middle half of the rounds."""

    median_s: float
    spread_s: float

    def per(self, count: int, scale: float = 1e6) -> float:
        """Time of one of ``count`` in a round; microseconds unless told otherwise."""
        return self.median_s / count * scale


def in_turn(ways: Mapping[str, Callable[[], float]], rounds: int) -> dict[str, Spent]:
    """Do each way once a round; the first round warms up and does not count.

    A way returns the seconds that count of it; see `timed`.
    """
    times: dict[str, list[float]] = {name: [] for name in ways}
    for number in range(rounds + 1):
        for name, work in ways.items():
            seconds = work()
            if number:
                times[name].append(seconds)
    return {name: _spent(values) for name, values in times.items()}


def timed(work: Callable[[], object]) -> Callable[[], float]:
    """A way all of which counts."""

    def way() -> float:
        began_s = time.perf_counter()
        work()
        return time.perf_counter() - began_s

    return way


def _spent(values: list[float]) -> Spent:
    ordered = sorted(values)
    quarter = len(ordered) // 4
    middle = ordered[quarter : len(ordered) - quarter]
    return Spent(statistics.median(ordered), (middle[-1] - middle[0]) / 2)
