"""Is it all right? One word for the whole night, and why."""

import math
from dataclasses import dataclass
from enum import IntEnum

from orchestrator.screen.picture import Picture
from orchestrator.screen.times import plays_in_2000
from orchestrator.stream.messages import LOST
from orchestrator.units import duration_text

_LEAST_STALE_S = 10.0
_STALE_INTERVALS = 5
_SMALL_MARGIN = 0.05
_RUN_CLOSE = ("field-ceiling", "ramp-ceiling")  # a good plan goes close to these on purpose
_LATE_S = 600.0


class Level(IntEnum):
    """How much a person is needed."""

    WELL = 1
    OVER = 2
    LOOK = 3
    WAKE = 4


@dataclass(frozen=True, slots=True)
class Verdict:
    """The night in a word, and the reasons, the worst first."""

    level: Level
    headline: str
    reasons: tuple[str, ...] = ()


def stale_after_s(picture: Picture) -> float:
    """Age in s of wall time beyond which the newest reading is called old."""
    return max(_LEAST_STALE_S, _STALE_INTERVALS * picture.interval_s)


def silent_instruments(picture: Picture) -> dict[str, float]:
    """Instruments that did not answer in the last few readings, and since when, in s."""
    if picture.newest is None:
        return {}
    limit_s = (_STALE_INTERVALS - 1) * picture.interval_s
    ages = {name: picture.newest.time_s - time_s for name, time_s in picture.heard_s.items()}
    return {name: age_s for name, age_s in ages.items() if age_s > limit_s}


def verdict(picture: Picture, now_unix_s: float) -> Verdict:
    """Judge what is known at a wall time; nothing heard is never taken for all being well."""
    standing = tuple(f"tripped: {name}" for name in picture.trips)
    if picture.outcome == LOST:
        return Verdict(Level.WAKE, "WAKE UP", ("the night's process has vanished", *standing))
    if picture.not_at_rest:
        ended = f"ended by {picture.outcome}"
        return Verdict(Level.WAKE, "WAKE UP", ("THE RIG IS NOT AT REST", *(standing or (ended,))))
    if standing:
        return Verdict(Level.WAKE, "WAKE UP", standing)
    if picture.outcome == "done":
        return Verdict(Level.OVER, "NIGHT OVER", ("all steps done",))
    if picture.outcome:
        stopped = picture.outcome == "stopped"
        reason = "stopped at the keyboard" if stopped else f"ended by {picture.outcome}"
        return Verdict(Level.LOOK, "NIGHT OVER", (reason,))
    return _while_it_runs(picture, now_unix_s)


def _while_it_runs(picture: Picture, now_unix_s: float) -> Verdict:
    if picture.newest is None:
        return Verdict(Level.LOOK, "NO READING YET", ("nothing can be said of the rig",))
    age_s = now_unix_s - picture.newest.unix_s
    if plays_in_2000(age_s):
        reason = "a rehearsal at full speed without an end: it still runs, or was cut short"
        return Verdict(Level.LOOK, "REHEARSAL", (reason,))
    if age_s > stale_after_s(picture):
        text = f"nothing read for {duration_text(age_s)}: the night or the way here has stopped"
        return Verdict(Level.WAKE, "NO NEWS", (text,))
    reasons = [
        *(
            f"{name} silent for {duration_text(s)}"
            for name, s in silent_instruments(picture).items()
        ),
        *_close_to_a_trip(picture),
        *(
            f"{name.removesuffix('_overload')} overloaded"
            for name, value in picture.values.items()
            if name.endswith("_overload") and value == 1
        ),
        *_late(picture),
    ]
    if reasons:
        return Verdict(Level.LOOK, "HAVE A LOOK", tuple(reasons))
    return Verdict(Level.WELL, "ALL IS WELL")


def _close_to_a_trip(picture: Picture) -> list[str]:
    margins = picture.state.margins if picture.state else {}
    close = sorted(
        (margin, name)
        for name, margin in margins.items()
        if margin is not None and margin < _SMALL_MARGIN and name not in _RUN_CLOSE
    )
    return [f"close to a trip: {name}" for _, name in close]


def _late(picture: Picture) -> list[str]:
    if picture.newest is None:
        return []
    late_s = picture.newest.time_s - picture.step_ends_s()
    if math.isnan(late_s) or late_s < _LATE_S:
        return []
    return [f"{picture.newest.step} is {duration_text(late_s)} late"]
