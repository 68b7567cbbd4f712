"""Values with their uncertainties, as a table shows them."""

import math

ONE_SD = (
    "± is one standard deviation, from the scatter of the data alone; errors in the calibration of "
    "field, current and thermometer come on top"
)
_SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


def with_uncertainty(value: float | None, spread: float | None) -> str:
    """A value with its standard deviation to two digits: ``412.58 ± 0.11``."""
    if value is None:
        return "-"
    if spread is None or not spread > 0:
        return f"{value:.6g}"
    exponent = f"{spread:.1e}".partition("e")[2]
    digits = max(0, 1 - int(exponent))
    return f"{value:.{digits}f} ± {spread:.{digits}f}"


def with_power(value: float | None, spread: float | None) -> str:
    """A large value with its standard deviation: ``(2.9997 ± 0.0011) × 10¹⁵``."""
    if value is None:
        return "-"
    power = math.floor(math.log10(abs(value))) if value else 0
    scale = 10.0**power
    inner = with_uncertainty(value / scale, None if spread is None else spread / scale)
    inside = f"({inner})" if "±" in inner else inner
    return f"{inside} × 10{str(power).translate(_SUPERSCRIPTS)}"
