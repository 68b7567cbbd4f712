"""Text with units to SI floats, and back to text for people.

``"0.3 T/min"``, ``"350 mK"``, ``"30 kG"`` and ``"1 uA"`` are what people write; floats in SI are
what the program computes with. The conversion happens here, at the edge, and nowhere else. A level
in percent stays in percent.
"""

import logging
import math
from functools import cache
from typing import Any

import pint


class UnitError(ValueError):
    """A text is not a finite quantity of the wanted kind. The message says what was expected."""


@cache
def registry() -> "pint.UnitRegistry[float]":
    """Pint's registry, with gauss as the tenth of a millitesla that gaussmeters read."""
    quiet = logging.getLogger("pint.util")
    quiet.setLevel(logging.ERROR)
    units: pint.UnitRegistry[float] = pint.UnitRegistry(on_redefinition="ignore")
    # The SI-side meaning of a reading in gauss: 1 G corresponds to 1e-4 T (ISO 80000-6, in vacuum).
    units.define("gauss = 1e-4 tesla = G")
    return units


def to_si(text: object, unit: str) -> float:
    """Convert a text with a unit to a float in ``unit``.

    Parameters
    ----------
    text : object
        What stood in the file; only a string with number and unit is taken.
    unit : str
        The unit of the result, for example ``"T/s"``; ``"1"`` for a plain number, which may then
        be given as a number.

    Returns
    -------
    float
        Finite value in ``unit``.

    Raises
    ------
    UnitError
        Not text, no unit, the wrong kind of unit, not a number, infinite.
    """
    if unit == "1":
        if isinstance(text, bool) or not isinstance(text, int | float):
            raise UnitError("expected a plain number without a unit")
        value = float(text)
    else:
        if not isinstance(text, str):
            raise UnitError(f'expected text with a unit, such as "1 {unit}"')
        value = _convert(text, unit)
    if not math.isfinite(value):
        raise UnitError("expected a finite number")
    return value


@cache
def _convert(text: str, unit: str) -> float:
    units = registry()
    try:
        quantity: Any = units.Quantity(text)
        if not isinstance(quantity.magnitude, int | float):
            raise UnitError(f"expected one number with a unit of {unit}")
        if quantity.dimensionless and quantity.units == units.Unit(""):
            raise UnitError(f'expected a unit as well, such as "{text.strip()} {unit}"')
        return float(quantity.to(unit).magnitude)
    except pint.UndefinedUnitError as error:
        names = (error.unit_names,) if isinstance(error.unit_names, str) else error.unit_names
        unknown = ", ".join(map(str, names))
        raise UnitError(f"expected a unit like {unit}; {unknown} is not a unit") from None
    except pint.DimensionalityError:
        raise UnitError(f"expected a unit that converts to {unit}") from None
    except UnitError:
        raise
    except Exception:  # pint's parser raises a wide range of types on malformed text
        raise UnitError(f'expected text with a unit, such as "1 {unit}"') from None


_STEPS = (
    (1e12, "T"),
    (1e9, "G"),
    (1e6, "M"),
    (1e3, "k"),
    (1.0, ""),
    (1e-3, "m"),
    (1e-6, "µ"),
    (1e-9, "n"),
)


def to_text(value: float | None, unit: str, digits: int = 4) -> str:
    """A value with its unit and an SI prefix that keeps the number readable, for screens.

    Ramp rates in T/s are shown in T/min, as the trade quotes them; kelvin per second likewise.
    """
    if value is None or not math.isfinite(value):
        return "-"
    if unit in ("T/s", "K/s"):
        return f"{value * 60:.{digits}g} {unit[0]}/min"
    if unit in ("percent", "1", ""):
        return f"{value:.{digits}g} %" if unit == "percent" else f"{value:.{digits}g}"
    if unit == "T" and abs(value) >= 1e-2:
        return f"{value:.{digits}g} T"
    size = abs(value)
    for factor, prefix in _STEPS:
        if size >= factor:
            return f"{value / factor:.{digits}g} {prefix}{unit}"
    return f"{value:.{digits}g} {unit}"


def duration_text(seconds: float) -> str:
    """A duration for people: ``"45 s"``, ``"12 min"``, ``"11 h 05 min"``."""
    if seconds < 90:
        return f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    if minutes < 90:
        return f"{minutes} min"
    return f"{minutes // 60} h {minutes % 60:02d} min"
