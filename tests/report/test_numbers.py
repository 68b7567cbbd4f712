"""Values with uncertainties as a physicist writes them: two digits of the standard deviation."""

import pytest

from orchestrator.report.numbers import with_power, with_uncertainty


@pytest.mark.parametrize(
    ("value", "spread", "text"),
    [
        (412.5812, 0.1099, "412.58 ± 0.11"),
        (0.19141, 0.00144, "0.1914 ± 0.0014"),
        (3500017.0, 80.0, "3500017 ± 80"),
        (1.0, 0.0, "1"),
        (2.5, None, "2.5"),
        (None, None, "-"),
    ],
)
def test_a_value_is_rounded_to_two_digits_of_its_standard_deviation(
    value: float | None, spread: float | None, text: str
) -> None:
    assert with_uncertainty(value, spread) == text


def test_a_large_value_is_told_with_a_power_of_ten() -> None:
    assert with_power(5.2e16, 2.8e13) == "(5.2000 ± 0.0028) × 10¹⁶"
    assert with_power(5.2e16, None) == "5.2 × 10¹⁶"
    assert with_power(None, None) == "-"
