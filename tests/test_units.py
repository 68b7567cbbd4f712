"""Text with units becomes SI floats, and what is not a quantity is refused in words."""

import pytest

from orchestrator.units import UnitError, duration_text, to_si, to_text


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("0.3 T/min", "T/s", 0.005),
        ("350 mK", "K", 0.35),
        # 1 G corresponds to 1e-4 T: SI Brochure, 9th edition (2019), table of other units.
        ("30 kG", "T", 3.0),
        ("1 uA", "A", 1e-6),
        ("24 hours", "s", 86400.0),
        ("30 percent", "percent", 30.0),
        ("2 nV/Hz^0.5", "V/Hz^0.5", 2e-9),
    ],
)
def test_text_with_a_unit_becomes_a_float_in_the_wanted_unit(
    text: str, unit: str, value: float
) -> None:
    assert to_si(text, unit) == pytest.approx(value, rel=1e-12)


@pytest.mark.parametrize(
    ("given", "unit", "words"),
    [
        ("12 K", "T", "converts to T"),
        ("12", "T", "a unit as well"),
        (12, "T", "text with a unit"),
        ("nan T", "T", "finite"),
        ("inf T", "T", "finite"),
        ("12 furlongz", "T", "unit like T"),
        ("", "T", "unit"),
        ("1e400 T", "T", "finite"),
        (True, "1", "plain number"),
        (float("nan"), "1", "finite"),
        ("11 h 30 min", "s", "converts to s"),
    ],
)
def test_what_is_not_a_finite_quantity_of_the_kind_is_refused(
    given: object, unit: str, words: str
) -> None:
    with pytest.raises(UnitError, match=words):
        to_si(given, unit)


def test_values_are_shown_with_a_readable_prefix() -> None:
    assert to_text(0.005, "T/s") == "0.3 T/min"
    assert to_text(0.35, "K") == "350 mK"
    assert to_text(12.0, "T") == "12 T"
    assert to_text(1e-6, "A") == "1 µA"
    assert to_text(82.5, "percent") == "82.5 %"
    assert to_text(float("nan"), "T") == "-"


def test_durations_are_shown_as_people_say_them() -> None:
    assert duration_text(45) == "45 s"
    assert duration_text(720) == "12 min"
    assert duration_text(11 * 3600 + 290) == "11 h 05 min"
