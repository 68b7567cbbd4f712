"""Units that instruments speak, as factors to SI, by the quantity that they measure."""

import math

_PREFIXES = {"n": 1e-9, "u": 1e-6, "m": 1e-3, "": 1.0, "k": 1e3, "M": 1e6}
_TIMES = {"s": 1.0, "min": 60.0, "h": 3600.0}


def _scaled(unit: str, prefixes: str) -> dict[str, float]:
    return {p + unit: _PREFIXES[p] for p in [*prefixes, ""]}


def _per_time(units: dict[str, float]) -> dict[str, float]:
    return {f"{u}/{t}": f / s for u, f in units.items() for t, s in _TIMES.items()}


_FIELD = {**_scaled("T", "um"), "G": 1e-4, "kG": 0.1}
_CURRENT = _scaled("A", "numk")
_TEMPERATURE = _scaled("K", "m")

UNITS: dict[str, dict[str, float]] = {
    "field": _FIELD,
    "field rate": _per_time(_FIELD),
    "current": _CURRENT,
    "voltage": _scaled("V", "numk"),
    "temperature": _TEMPERATURE,
    "temperature rate": _per_time(_TEMPERATURE),
    "power": _scaled("W", "numk"),
    "time": {**_scaled("s", "num"), "min": 60.0, "h": 3600.0},
    "frequency": _scaled("Hz", "mkM"),
    "count": {"1": 1.0},
    "gauge": {
        "percent": 1.0,
        "fraction": 100.0,
        "Pa": 1.0,
        "kPa": 1e3,
        "mbar": 100.0,
        "bar": 1e5,
    },
}
"""Quantity to its units on the wire, each with its factor to SI (a level: to percent)."""

CURRENT_UNITS: dict[str, dict[str, float]] = {
    "field": _CURRENT,
    "field rate": _per_time(_CURRENT),
}
"""For supplies that speak of field as current: factor to A or A/s, before the coil constant."""


def factor_to_si(quantity: str, unit: str, coil_constant_t_per_a: float | None) -> float:
    """Factor that turns a number on the wire into SI.

    Raises
    ------
    KeyError
        The quantity is not spoken in this unit.
    ValueError
        The coil constant is needed and was not given.
    """
    units = UNITS[quantity]
    if unit in units:
        return units[unit]
    factor = CURRENT_UNITS.get(quantity, {})[unit]
    if coil_constant_t_per_a is None or not 0 < abs(coil_constant_t_per_a) < math.inf:
        raise ValueError(
            f"{unit} needs the magnet's coil constant, which is {coil_constant_t_per_a!r}"
        )
    return factor * coil_constant_t_per_a


def allowed_units(quantity: str) -> list[str]:
    """Every unit that the quantity may have on the wire."""
    return [*UNITS[quantity], *CURRENT_UNITS.get(quantity, {})]
