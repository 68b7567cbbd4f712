"""A small plot of points in a terminal, drawn with the dots of braille characters."""

import math
from collections.abc import Sequence

import numpy as np
from numpy.polynomial import Polynomial

_DOTS = ((0x01, 0x08), (0x02, 0x10), (0x04, 0x20), (0x40, 0x80))  # Unicode 2800-28FF, row, column
_LEAST_COLUMNS, _LEAST_ROWS = 12, 2
_LEAST_POINTS = 100  # of a sweep whose background is taken off
_LEAST_SPAN = 1.15  # its largest field over its smallest
_BACKGROUND_ORDER = 4


def plot(
    x: Sequence[float],
    y: Sequence[float],
    *,
    width: int,
    height: int,
    x_name: str,
    y_name: str,
) -> list[str]:
    """Lines of text that show y against x.

    Parameters
    ----------
    x, y : sequence of float
        Points in the order in which they came; those that are not finite are left out.
    width, height : int
        Room in characters, axes and names included.
    x_name, y_name : str
        Names of the axes with their units, such as ``"field / T"``.

    Returns
    -------
    list of str
        ``height`` lines of at most ``width`` characters. Empty if there are fewer than two points,
        or too little room for a plot.

    Notes
    -----
    Within a column of dots all values from the least to the largest are filled, and neighbours in
    time are joined, so that an oscillation finer than the dots shows as a band, not as an alias.
    """
    points = [(a, b) for a, b in zip(x, y, strict=True) if math.isfinite(a) and math.isfinite(b)]
    if len(points) < 2:
        return []
    left, right = min(a for a, _ in points), max(a for a, _ in points)
    low, high = min(b for _, b in points), max(b for _, b in points)
    top, bottom = (f"{value:.{_decimals(low, high)}f}" for value in (high, low))
    margin = max(len(top), len(bottom)) + 1
    columns, rows = width - margin - 1, height - 3
    if columns < _LEAST_COLUMNS or rows < _LEAST_ROWS or right == left:
        return []
    spread = (high - low) or 1.0
    cells = [[0] * columns for _ in range(rows)]

    def across(value: float) -> int:
        return round((value - left) / (right - left) * (2 * columns - 1))

    def down(value: float) -> int:
        return round((high - value) / spread * (4 * rows - 1))

    before = (across(points[0][0]), down(points[0][1]))
    for point in points:
        now = (across(point[0]), down(point[1]))
        for column, row in _line(before, now):
            cells[row // 4][column // 2] |= _DOTS[row % 4][column % 2]
        before = now
    lines = [f"{'':{margin}} {y_name}"]
    for number, row_of_cells in enumerate(cells):
        label = top if number == 0 else bottom if number == rows - 1 else ""
        lines.append(f"{label:>{margin}}┤" + "".join(chr(0x2800 + dots) for dots in row_of_cells))
    first, last = (f"{value:.{_decimals(left, right)}f}" for value in (left, right))
    lines.append(f"{'':{margin}}└" + "─" * columns)
    room = columns - len(first) - len(last)
    lines.append(f"{'':{margin}} {first}{x_name[: max(room - 2, 0)]:^{room}}{last}")
    return [line[:width] for line in lines]


def oscillation(
    field_t: Sequence[float], ohm: Sequence[float]
) -> tuple[list[float], list[float]] | None:
    """What oscillates in a sweep, against 1/B, where it is even; for the eye, not for results.

    Parameters
    ----------
    field_t, ohm : sequence of float
        Field in tesla and resistance in ohm, in the order in which they came.

    Returns
    -------
    tuple of two lists, or None
        1/|B| in 1/T, and the resistance in ohm less a polynomial in B of fourth order. None while
        the sweep is too short for a background to be told from its oscillations.
    """
    size, values = np.abs(np.asarray(field_t)), np.asarray(ohm)
    good = np.isfinite(size) & np.isfinite(values) & (size > 0)
    size, values = size[good], values[good]
    if size.size < _LEAST_POINTS or size.max() < _LEAST_SPAN * size.min():
        return None
    smooth = Polynomial.fit(size, values, _BACKGROUND_ORDER)(size)
    return (1 / size).tolist(), (values - smooth).tolist()


def _line(begin: tuple[int, int], end: tuple[int, int]) -> list[tuple[int, int]]:
    """Dots on the straight way between two dots, both included."""
    steps = max(abs(end[0] - begin[0]), abs(end[1] - begin[1]), 1)
    return [
        (
            round(begin[0] + (end[0] - begin[0]) * step / steps),
            round(begin[1] + (end[1] - begin[1]) * step / steps),
        )
        for step in range(steps + 1)
    ]


def _decimals(low: float, high: float) -> int:
    """Decimals that tell the ends of an axis apart, with three digits of their difference."""
    if high == low:
        return 3
    return min(9, max(0, 2 - math.floor(math.log10(high - low))))
