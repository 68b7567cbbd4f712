"""The staircase: legs of constant rate that follow a rate profile from below, each safe alone."""

import math
from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

import numpy as np

from orchestrator.planning.ceilings import Array, Ceilings

_GRID = 240
_ROUNDING = 1e-9


class PlanError(Exception):
    """No staircase can be made; the message says which numbers clash."""


@dataclass(frozen=True, slots=True)
class Leg:
    """A stretch at one rate.

    Attributes
    ----------
    from_t, to_t : float
        Where the leg begins and ends, T.
    rate_t_per_s : float
        Its rate, a multiple of the supply's resolution.
    target_t : float
        The farthest field on the way to which this rate is allowed everywhere, at or beyond
        ``to_t``: what the supply is told, so that it need not stop at the leg's end and yet is
        safe if it never hears from us again.
    binding : str
        The ceiling that binds the leg.
    """

    from_t: float
    to_t: float
    rate_t_per_s: float
    target_t: float
    binding: str

    @property
    def duration_s(self) -> float:
        """Time that the leg takes, s."""
        return abs(self.to_t - self.from_t) / self.rate_t_per_s


def duration_s(legs: tuple[Leg, ...]) -> float:
    """Time that the legs take, s."""
    return sum(leg.duration_s for leg in legs)


def staircase(
    ceilings: Ceilings,
    from_t: float,
    to_t: float,
    *,
    legs_max: int,
    rate_resolution_t_per_s: float,
) -> tuple[Leg, ...]:
    """Legs from one field to another in the least time that ``legs_max`` legs allow.

    The breakpoints are chosen from a grid by dynamic programming; the grid holds every edge of
    the ceilings, the ends, and zero field where it is crossed.

    Raises
    ------
    PlanError
        A rate rounds to zero at the supply's resolution, or the ceilings allow none.
    """
    if from_t == to_t:
        return ()
    points = _grid(ceilings, from_t, to_t)
    # Rates allowed over each cell of the grid; over a stretch it is the least of its cells'.
    cells = [ceilings.over(a, b) for a, b in pairwise(points)]
    rates = _floored(np.array([rate for rate, _ in cells]), rate_resolution_t_per_s)
    if not (rates > 0).all():
        at = int(np.argmin(rates))
        rate, name = cells[at]
        raise PlanError(
            f"between {points[at]:.4f} T and {points[at + 1]:.4f} T the {name} allows "
            f"{60 * rate:.3g} T/min, and the supply's resolution is "
            f"{60 * rate_resolution_t_per_s:.3g} T/min: no ramp is possible there"
        )
    breaks = _breakpoints(np.abs(np.diff(points)), rates, legs_max)
    legs = []
    for start, end in pairwise(breaks):
        at = start + int(np.argmin(rates[start:end]))
        rate = float(rates[at])
        slower = np.nonzero(rates[end:] < rate * (1 - _ROUNDING))[0]
        farthest = end + int(slower[0]) if slower.size else len(points) - 1
        legs.append(
            Leg(
                float(points[start]),
                float(points[end]),
                rate,
                float(points[farthest]),
                cells[at][1],
            )
        )
    return tuple(legs)


def _grid(ceilings: Ceilings, from_t: float, to_t: float) -> Array:
    low, high = sorted((from_t, to_t))
    even = np.linspace(low, high, _GRID // 2)
    points = set(even[1:-1])
    near, far = min(abs(low), abs(high)), max(abs(low), abs(high))
    sign = 1.0 if low >= 0 else -1.0
    if low * high > 0:
        # Even in 1/B too, since that is where the period ceilings change most.
        points |= {sign / x for x in np.linspace(1 / near, 1 / far, _GRID // 2)[1:-1]}
    if low < 0 < high:
        points.add(0.0)
    for member in ceilings.members:
        for edge in member.edges_t:
            points |= {side for side in (edge, -edge) if low < side < high}
    ordered = np.array([low, *sorted(point for point in points if low < point < high), high])
    keep = np.concatenate([[True], np.diff(ordered) > _ROUNDING])
    ordered = ordered[keep]
    ordered[-1] = high
    if to_t < from_t:
        ordered = ordered[::-1]
    return np.asarray(ordered, dtype=np.float64)


def _floored(rates: Array, resolution: float) -> Array:
    floored: Array = np.floor(rates / resolution * (1 + _ROUNDING)) * resolution
    return floored


def _breakpoints(lengths: Array, rates: Array, legs_max: int) -> list[int]:
    """Cut cells into at most ``legs_max`` runs, each at its slowest cell's rate, in least time."""
    count = len(lengths)
    ends = np.concatenate([[0.0], np.cumsum(lengths)])
    # cost[i, j]: time of one leg over the cells i .. j-1
    cost = np.full((count + 1, count + 1), math.inf)
    for start in range(count):
        slowest = np.minimum.accumulate(rates[start:])
        cost[start, start + 1 :] = (ends[start + 1 :] - ends[start]) / slowest
    best = cost[0].copy()
    came = [np.zeros(count + 1, dtype=int)]
    for _ in range(min(legs_max, count) - 1):
        through = best[:, None] + cost
        previous = np.argmin(through, axis=0)
        better = through[previous, np.arange(count + 1)]
        # Another leg must be worth its command: no gain, no leg.
        gained = better < best * (1 - 1e-6)
        came.append(np.where(gained, previous, -1))
        best = np.where(gained, better, best)
        if not gained.any():
            break
    breaks, at = [count], count
    for layer in reversed(came[1:]):
        if layer[at] >= 0 and at > 0:
            at = int(layer[at])
            breaks.append(at)
    if at != 0:
        breaks.append(0)
    return breaks[::-1]


def commands_between(
    previous: Leg | None, leg: Leg
) -> tuple[tuple[Literal["rate", "target"], float], ...]:
    """The commands from one leg to the next, in the order in which each is safe as the last.

    To a slower rate: the rate first, while the old target still holds. To a faster rate, which is
    asked for only once the field is past the slower stretch: the target first where it is nearer
    than the old one, then the rate, then a farther target.
    """
    rate: tuple[Literal["rate", "target"], float] = ("rate", leg.rate_t_per_s)
    target: tuple[Literal["rate", "target"], float] = ("target", leg.target_t)
    if previous is None or leg.rate_t_per_s <= previous.rate_t_per_s:
        return rate, target
    upwards = 1.0 if leg.to_t >= leg.from_t else -1.0
    nearer = upwards * (previous.target_t - leg.target_t) > 0
    return (target, rate) if nearer else (rate, target)


def switch_field_t(leg: Leg, following: Leg, lead_s: float) -> float:
    """Field in T at which the next leg's commands are due.

    A slower leg's are sent ``lead_s`` before its beginning, so that they are in force when the
    field gets there; a faster leg's once the field has passed it.
    """
    if following.rate_t_per_s > leg.rate_t_per_s:
        return leg.to_t
    lead_t = min(leg.rate_t_per_s * lead_s, abs(leg.to_t - leg.from_t))
    return leg.to_t - math.copysign(lead_t, leg.to_t - leg.from_t)
