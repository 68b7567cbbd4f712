"""Times of several ways to do the same, taken in turn so that a busy moment hits them all."""

import statistics
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Figure:
    """Median over the rounds, and half of what the middle half of them spans; None for one."""

    value: float
    spread: float | None = None

    @classmethod
    def of(cls, values: Sequence[float]) -> "Figure":
        """Of one value a round."""
        ordered = sorted(values)
        quarter = len(ordered) // 4
        middle = ordered[quarter : len(ordered) - quarter]
        spread = (middle[-1] - middle[0]) / 2 if len(ordered) > 1 else None
        return cls(statistics.median(ordered), spread)


@dataclass(frozen=True, slots=True)
class Spent:
    """Seconds that one way took in each round."""

    rounds_s: tuple[float, ...]

    def seconds(self) -> Figure:
        """Of a round."""
        return Figure.of(self.rounds_s)

    def per(self, count: int) -> Figure:
        """Microseconds of one of ``count`` in a round."""
        return Figure.of([1e6 * seconds / count for seconds in self.rounds_s])

    def over(self, other: "Spent") -> Figure:
        """Ratio to another way in the same round."""
        pairs = zip(self.rounds_s, other.rounds_s, strict=True)
        return Figure.of([mine / theirs for mine, theirs in pairs])

    def into(self, seconds: float) -> Figure:
        """How often it fits into a time."""
        return Figure.of([seconds / one for one in self.rounds_s])


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
    return {name: Spent(tuple(values)) for name, values in times.items()}


def timed(work: Callable[[], object]) -> Callable[[], float]:
    """A way all of which counts."""

    def way() -> float:
        began_s = time.perf_counter()
        work()
        return time.perf_counter() - began_s

    return way
