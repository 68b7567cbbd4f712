"""How numbers, times and events are put in words on a screen."""

import math
from datetime import datetime

from orchestrator.stream.messages import EventMessage
from orchestrator.units import duration_text


def plain(text: str) -> str:
    """Text in one line without anything that a terminal would obey."""
    return " ".join("".join(c if c.isprintable() else " " for c in text).split())


def clock(unix_s: float, *, seconds: bool = False) -> str:
    """Local wall time, such as ``03:42``; ``--:--`` where it is not known."""
    return _local(unix_s, "%H:%M:%S" if seconds else "%H:%M", "--:--")


def day(unix_s: float) -> str:
    """Local date, such as ``2030-03-17``."""
    return _local(unix_s, "%Y-%m-%d", "----------")


def _local(unix_s: float, pattern: str, otherwise: str) -> str:
    try:
        return datetime.fromtimestamp(unix_s).strftime(pattern)
    except (ValueError, OverflowError, OSError):
        return otherwise


def number_text(value: float, decimals: int, unit: str) -> str:
    """A value with fixed decimals, so that it does not jump about; a dash where there is none."""
    if not math.isfinite(value):
        return f"- {unit}"
    return f"{round(value, decimals) + 0.0:.{decimals}f} {unit}"  # + 0.0: no minus before nought


def ohm_text(ohm: float) -> str:
    """A resistance with five digits, zeros at the end included."""
    if not math.isfinite(ohm):
        return "- ohm"
    for factor, unit in ((1e3, "kohm"), (1.0, "ohm"), (1e-3, "mohm")):
        if abs(ohm) >= factor:
            return f"{ohm / factor:#.5g} {unit}"
    return f"{ohm * 1e6:#.5g} µohm"


def with_sd(value: object, sd: object, unit: str = "") -> str:
    """A value and its standard deviation, both to two digits of the latter; a dash without one."""
    if not isinstance(value, int | float) or not math.isfinite(value):
        return "-"
    behind = f" {unit}" if unit else ""
    if not isinstance(sd, int | float) or not math.isfinite(sd) or sd <= 0:
        return f"{value:.5g}{behind}"
    decimals = min(9, max(0, 1 - math.floor(math.log10(sd))))
    return f"{value:.{decimals}f} ± {sd:.{decimals}f}{behind}"


def event_text(event: EventMessage) -> str:
    """An event as a sentence of a few words."""
    name, data, text = plain(event.name), event.data, plain(event.text)
    phase = str(data.get("phase", ""))
    if event.event_kind == "step" and phase:
        outcome = plain(str(data.get("outcome", "")))
        return f"{name} {plain(phase)}" + (f": {outcome}" if outcome else "")
    if event.event_kind == "plan":
        seconds = data.get("duration_s")
        took = f", {duration_text(seconds)}" if isinstance(seconds, int | float) else ""
        return f"{name} planned: {text}{took}"
    if event.event_kind == "trip":
        return f"TRIP {name}: {text}"
    if event.event_kind == "night":
        return f"night {name}" + (f": {text}" if text else "")
    if event.event_kind in ("acknowledge", "request"):
        return text or f"{event.event_kind} {name}"
    return f"{plain(event.event_kind)} {name}" + (f": {text}" if text else "")
