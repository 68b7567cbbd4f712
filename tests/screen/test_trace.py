"""The plot of dots: where points land, what the axes say, and what there is no room for."""

import math

from orchestrator.screen.trace import oscillation, plot


def dots(lines: list[str]) -> set[tuple[int, int]]:
    """Columns and rows of the dots that are set, rows downwards; bits after Unicode's chart."""
    found = set()
    order = [(0, 0), (0, 1), (0, 2), (1, 0), (1, 1), (1, 2), (0, 3), (1, 3)]
    for row, line in enumerate(lines[1:-2]):
        for column, character in enumerate(line[line.index("┤") + 1 :]):
            bits = ord(character) - 0x2800
            found |= {
                (2 * column + x, 4 * row + y) for bit, (x, y) in enumerate(order) if bits >> bit & 1
            }
    return found


def test_a_straight_line_runs_from_corner_to_corner() -> None:
    """Every column of dots is met, rising to the right, ends in the corners."""
    lines = plot([3.0, 12.0], [1.0, 5.0], width=60, height=13, x_name="x / T", y_name="y / ohm")
    assert len(lines) == 13
    assert max(map(len, lines)) == 60
    found = dots(lines)
    columns = max(column for column, _ in found)
    assert {(0, 39), (columns, 0)} <= found
    assert {column for column, _ in found} == set(range(columns + 1))
    heights = [min(row for column, row in found if column == at) for at in range(columns + 1)]
    assert heights == sorted(heights, reverse=True)


def test_axes_have_names_units_and_ends() -> None:
    """Names as given; the ends with three digits of their difference."""
    lines = plot(
        [3.0, 12.0], [100.0, 100.05], width=60, height=10, x_name="field / T", y_name="R / ohm"
    )
    assert lines[0].strip() == "R / ohm"
    assert lines[1].startswith(" 100.0500┤")
    assert lines[-3].startswith(" 100.0000┤")
    assert lines[-1].split() == ["3.00", "field", "/", "T", "12.00"]


def test_an_oscillation_finer_than_the_dots_is_a_band() -> None:
    """No alias: every column is filled over nearly the whole height."""
    x = [i / 5000 for i in range(5001)]
    y = [math.sin(2 * math.pi * 700 * one) for one in x]
    found = dots(plot(x, y, width=50, height=11, x_name="x", y_name="y"))
    for column in range(max(c for c, _ in found) + 1):
        assert sum(1 for c, _ in found if c == column) > 25


def test_nothing_to_draw_draws_nothing() -> None:
    """Too few points, no width of x, values that are missing, or no room; a constant is a line."""

    def lines(x: list[float], y: list[float], width: int = 60, height: int = 10) -> list[str]:
        return plot(x, y, width=width, height=height, x_name="x", y_name="y")

    assert lines([], []) == lines([1.0], [2.0]) == lines([1.0, 1.0], [2.0, 3.0]) == []
    assert lines([1.0, math.nan, 2.0], [math.nan, 1.0, 3.0]) == []
    assert lines([1.0, 2.0], [1.0, 2.0], width=12) == lines([1.0, 2.0], [1.0, 2.0], height=4) == []
    assert len({row for _, row in dots(lines([1.0, 2.0], [3.0, 3.0]))}) == 1


def test_background_is_taken_off_and_the_oscillation_left() -> None:
    """A cosine of 1/B on a parabola comes back to a twentieth of its amplitude."""
    field_t = [4 + 0.004 * i for i in range(1501)]
    pure = [0.3 * math.cos(2 * math.pi * 410 / one) for one in field_t]
    ohm = [100 + 0.2 * one**2 + wave for one, wave in zip(field_t, pure, strict=True)]
    found = oscillation(field_t, ohm)
    assert found is not None
    assert math.isclose(found[0][0], 0.25)
    assert max(abs(a - b) for a, b in zip(found[1], pure, strict=True)) < 0.015
    assert oscillation(field_t[:99], ohm[:99]) is None
    assert oscillation(field_t[:140], ohm[:140]) is None
    assert oscillation([0.0] * 200, [1.0] * 200) is None
