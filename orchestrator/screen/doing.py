"""What a night is doing and until when, or how it has ended."""

import math
import textwrap
from collections.abc import Mapping
from typing import Any

from orchestrator.screen.picture import Picture
from orchestrator.screen.rows import Lines, bar, row, row_with_end
from orchestrator.screen.times import Times
from orchestrator.screen.wording import plain
from orchestrator.units import duration_text


def doing(picture: Picture, times: Times, width: int) -> Lines:
    """The rows of the step and of the night; after its end, when that was and at rest or not."""
    newest = picture.newest
    if newest is None:
        return [row("doing", "waiting for the first reading")]
    if picture.outcome:
        return _ended(picture, times, width)
    started = picture.step_started.get(newest.step)
    what = _what(started.data if started else {})
    until = _until(picture, times, picture.step_ends_s())
    planned = picture.planned_step(newest.step)
    if until and planned is not None and planned.name != newest.step:
        until = f"; its sweep{until.removeprefix(',')}"
    lines = row_with_end(width, "doing", until, (plain(newest.step), "bold"), what)
    parts = []
    if picture.steps:
        done = sum(1 for one in picture.steps if one.name in picture.steps_finished)
        parts.append(f"{done} of {len(picture.steps)} steps done")
    ends_s = picture.night_ends_s()
    if picture.started_s is not None and ends_s > picture.started_s:
        part = (newest.time_s - picture.started_s) / (ends_s - picture.started_s)
        parts.append(f"{bar(part)} {100 * min(1.0, part):.0f} %")
    elif picture.state is not None and picture.state.progress is not None:
        parts.append(f"{bar(picture.state.progress)} {100 * picture.state.progress:.0f} %")
    until = _until(picture, times, ends_s) or _told_end(picture, times)
    return lines + row_with_end(width, "night", until, ", ".join(parts))


def _ended(picture: Picture, times: Times, width: int) -> Lines:
    if picture.ended is None:
        return [row("doing", "?")]
    after = "after " if times.start_unix_s is not None else ""
    ended = f"nothing any more; ended {after}{times.at(picture.ended.unix_s)}"
    parked = picture.not_at_rest
    if not parked:
        at_rest = picture.ended.data.get("parked") == "parked"
        return row_with_end(width, "doing", "; the rig is parked" if at_rest else "", ended)
    reasons = textwrap.wrap(plain(parked), width - 15)[:4]
    rest = [row("rig", ("NOT AT REST", "bold"))]
    return [row("doing", ended), *rest, *(row("", (one, "bold")) for one in reasons)]


def _what(data: Mapping[str, Any]) -> str:
    """What a step does, from the data of its start."""
    kind, to_t, kelvin = data.get("type"), data.get("to_t"), data.get("temperature_k")
    at = f" at {kelvin:g} K" if isinstance(kelvin, int | float) else ""
    if kind == "field-sweep" and isinstance(to_t, int | float):
        from_t = data.get("from_t")
        begin = f" from {from_t:g}" if isinstance(from_t, int | float) else ""
        return f": sweep{begin} to {to_t:g} T{at}"
    if kind == "approach" and isinstance(to_t, int | float):
        return f": on the way to {to_t:g} T"
    if kind == "settle":
        return f": wait until steady{at}"
    if kind == "park":
        return ": ramp to rest, heaters off"
    return ""


def _until(picture: Picture, times: Times, time_s: float) -> str:
    if math.isnan(time_s) or picture.newest is None:
        return ""
    left_s = (time_s - picture.newest.time_s) * picture.pace()
    when = times.at(picture.unix_of(time_s))
    if left_s < 0:
        return f", was due {when} ({duration_text(-left_s)} late)"
    return f", until {when} ({duration_text(left_s)} left)"


def _told_end(picture: Picture, times: Times) -> str:
    end = picture.state.expected_end_unix_s if picture.state else None
    return "" if end is None else f", until {times.at(end)}"
