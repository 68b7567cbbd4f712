"""The screen of a night, for somebody half asleep on a small terminal.

Read from the top: is it all right; what is it doing and until when; what the rig reads; how near
the trips are; what has been found; what has happened. Colour only repeats what words say.
"""

import math
from collections.abc import Iterable, Mapping
from typing import Any

from rich.console import Group, RenderableType
from rich.text import Text

from orchestrator.screen.doing import doing
from orchestrator.screen.picture import Picture, slope
from orchestrator.screen.rows import BAR, Lines, bar, row, title
from orchestrator.screen.times import Times, plays_in_2000
from orchestrator.screen.trace import oscillation, plot
from orchestrator.screen.tripped import standing_trips
from orchestrator.screen.verdict import Level, silent_instruments, stale_after_s, verdict
from orchestrator.screen.wording import (
    clock,
    day,
    event_text,
    number_text,
    ohm_text,
    plain,
    with_sd,
)
from orchestrator.units import duration_text

_STYLES = {
    Level.WELL: "bold black on green",
    Level.OVER: "bold reverse",
    Level.LOOK: "bold black on yellow",
    Level.WAKE: "bold white on red",
}
_LEAST_PLOT = 7
_MOST_PLOT = 22
_MARGINS = 6
_SPELT_OUT = str.maketrans(
    {
        "·": "-",
        "█": "#",
        "░": ".",
        "±": "+-",
        "ₑ": "_e",
        "×": "x",
        "…": "~",
        "¹": "^1",
        "⁵": "5",
        "²": "2",
    }
)
_AT_REST_T_PER_S = 2e-6
_VALUE = 13
_STEADY_K_PER_MIN = 0.002


def render(
    picture: Picture, *, now_unix_s: float, width: int, height: int, encoding: str = "utf-8"
) -> RenderableType:
    """The screen as lines of text, at most `height` of at most `width` characters.

    Parameters
    ----------
    picture : Picture
        What is known.
    now_unix_s : float
        Wall time of the look, seconds since 1970.
    width, height : int
        Room in characters; made for 80 by 24 and more.
    encoding : str
        Of what it is written to; without Unicode there is no plot, and signs are spelt out.
    """
    unicode = encoding.lower().startswith("utf")
    times = Times.of(picture, now_unix_s)
    head = _head(picture, now_unix_s, width)
    body = [doing(picture, times, width), _values(picture, now_unix_s)]
    trips = standing_trips(picture, times, width)
    margins = _margins(picture, width, most=_MARGINS if height < 36 else 12)
    findings = _findings(picture, most=3 if height < 36 else 6)
    sections = [*body, *([trips] if trips else [margins]), findings]
    if trips and height >= 36 and picture.state is not None:
        sections.insert(-1, margins)
    used = len(head) + sum(len(one) + 1 for one in sections)
    left = height - used - 1
    events = 3 if height < 36 else 6
    room = min(left - (events + 2), _MOST_PLOT)
    if unicode and room >= _LEAST_PLOT and (drawn := _plot(picture, width, room)):
        sections.append(drawn)
        left -= len(drawn) + 1
    if left >= 2:
        sections.append(_events(picture, times, left - 1))
    lines = head
    for section in sections:
        if section:
            lines = [*lines, Text(), *section]
    for line in lines:
        if not unicode:
            line.plain = line.plain.translate(_SPELT_OUT).encode("ascii", "replace").decode()
        line.truncate(width, overflow="ellipsis" if unicode else "crop")
        line.no_wrap = True
    return Group(*lines[:height])


def _head(picture: Picture, now_unix_s: float, width: int) -> Lines:
    """The verdict over the whole width, its reasons, and the age of what is shown."""
    found = verdict(picture, now_unix_s)
    whose = f"{plain(picture.rig)} · {plain(picture.night)}" if picture.night else ""
    if picture.newest is None:
        heard = f"now {clock(now_unix_s)}"
    else:
        age_s = max(0.0, now_unix_s - picture.newest.unix_s)
        old = not picture.outcome and age_s > stale_after_s(picture)
        heard = f"{'LAST READ' if old else 'read'} {duration_text(age_s)} ago"
        if plays_in_2000(age_s):
            heard = "times since its start"
        elif age_s > 86400:
            heard = f"last read {day(picture.newest.unix_s)}"
    room = max(0, width - len(found.headline) - len(heard) - 6)
    left = f" {found.headline}  {whose if len(whose) <= room else whose[: max(room - 1, 0)] + '…'}"
    space = max(2, width - len(left) - len(heard) - 1)
    banner = Text(f"{left}{'':{space}}{heard} ", style=_STYLES[found.level])
    lines = [banner]
    for reason in found.reasons[:2]:
        lines.append(Text(f" {'!' if found.level >= Level.LOOK else ' '} {plain(reason)}", "bold"))
    if len(found.reasons) > 2:
        lines[-1].append(f"   and {len(found.reasons) - 2} more")
    return lines


def _values(picture: Picture, now_unix_s: float) -> Lines:
    """What the rig reads; the word OLD stands behind all of it when it is."""
    newest = picture.newest
    if newest is None:
        return []
    is_old = not picture.outcome and now_unix_s - newest.unix_s > stale_after_s(picture)
    silent = silent_instruments(picture)

    def behind(instrument: str) -> tuple[str, str]:
        if instrument in silent:
            return f"  SILENT for {duration_text(silent[instrument])}", "bold"
        return "  OLD" if is_old else "", "bold"

    def last(channel: str, decimals: int, unit: str) -> str:
        """What a channel without a value said last."""
        known = picture.last_known.get(channel)
        if known is None or math.isfinite(get(channel, math.nan)):
            return ""
        return f"last {number_text(known, decimals, unit)}"

    get = picture.values.get
    field_t, kelvin = get("field_t", math.nan), get("sample_k", math.nan)
    lines = [
        row(
            "field",
            _big(number_text(field_t, 4, "T")),
            *_ramp(picture, field_t),
            last("field_t", 4, "T"),
            behind("magnet"),
        )
    ]
    setpoint, change = get("setpoint_k", math.nan), _kelvin_per_min(picture)
    wanted = f"set {setpoint:g} K" if math.isfinite(setpoint) else ""
    moving = f", changing {change:+.3f} K/min" if abs(change) >= _STEADY_K_PER_MIN else ""
    lines.append(
        row(
            "temperature",
            _big(number_text(kelvin, 4, "K")),
            last("sample_k", 4, "K") or wanted,
            moving,
            behind("stage"),
        )
    )
    if ohm := picture.longitudinal_ohm():
        overload = "  OVERLOAD" if get(f"{ohm[0]}_overload") == 1 else ""
        parts = (plain(ohm[0]), (overload, "bold"), behind(ohm[0]))
        lines.append(row("resistance", _big(ohm_text(ohm[1])), *parts))
    for channel, levels in picture.levels.items():
        name = channel.removesuffix("_percent")
        text = _big(number_text(get(channel, math.nan), 1, "%"))
        trend = last(channel, 1, "%") or _trend(list(levels))
        lines.append(row(plain(name), text, trend, behind(name)))
    return lines


def _big(text: str) -> tuple[str, str]:
    return f"{text:<{_VALUE}}", "bold"


def _ramp(picture: Picture, field_t: float) -> list[str]:
    """Which way the field moves, how fast, and what keeps it from going faster."""
    rate = picture.field_rate_t_per_s()
    if not math.isfinite(rate) or not math.isfinite(field_t):
        return []
    if abs(rate) < _AT_REST_T_PER_S:
        return ["at rest"]
    growing = rate * field_t > 0
    parts = [f"{'rising' if growing else 'falling'} {60 * abs(rate):.4f} T/min"]
    plan, newest = picture.plan, picture.newest
    if plan and newest and plan.step == newest.step and (leg := plan.leg_at(field_t)):
        parts.append(f", bound by {plain(leg.binding)}")
    return parts


def _kelvin_per_min(picture: Picture) -> float:
    points = [(time_s, kelvin) for time_s, _, _, _, kelvin in picture.recent]
    found = slope([one for one in points if math.isfinite(one[1])])
    return 60 * found if math.isfinite(found) else 0.0


def _trend(levels: list[tuple[float, float]]) -> str:
    if len(levels) < 10:
        return ""
    return f"{3600 * slope(levels):+.2f} %/h"


def _margins(picture: Picture, width: int, most: int) -> Lines:
    """The smallest margins, in two columns where they fit."""
    known = picture.state.margins if picture.state else {}
    if not known and picture.outcome:
        return []
    if not known:
        return [
            title("Margins"),
            Text("  not known: they come with the stream, and no broker has told them"),
        ]
    nearest = sorted(known.items(), key=lambda one: -1.0 if one[1] is None else one[1])[:most]
    cells = [_margin(name, margin) for name, margin in nearest]
    columns = 2 if width >= 76 else 1
    rows = math.ceil(len(cells) / columns)
    text = "Margins, the smallest first (1 at rest, 0 trips)"
    if len(known) > len(nearest):
        text += f"; {len(known) - len(nearest)} larger ones left out"
    lines = [title(text)]
    for at in range(rows):
        line = Text("  ")
        for cell in cells[at::rows]:
            line.append_text(cell)
        lines.append(line)
    return lines


def _margin(name: str, margin: float | None) -> Text:
    text = f"{plain(name)[:20]:<20} "
    if margin is None:
        return Text(f"{text}{'not known':<{BAR + 7}}", "bold")
    style = "bold" if margin < 0.1 else ""
    return Text(f"{text}{bar(margin)} {margin:4.2f}  ", style)


def _findings(picture: Picture, most: int) -> Lines:
    finding = picture.finding
    if finding is None:
        return [title("Findings"), Text("  none yet; they come after each field sweep")]
    sweeps = finding.get("sweeps")
    text = f"Findings after {plain(str(finding.get('after', '?')))}"
    lines = [title(text + (f", {sweeps} sweeps together" if sweeps not in (None, 1) else ""))]
    orbits = [one for one in _list(finding.get("orbits")) if isinstance(one, dict)]
    for one in orbits[:most]:
        lines.append(Text("  " + _orbit(one)))
    if len(orbits) > most:
        lines[-1].append(f"   and {len(orbits) - most} more")
    if not orbits:
        lines.append(Text("  no oscillation stands above the noise"))
    hall = finding.get("hall")
    if isinstance(hall, dict) and most > 3:
        density = with_sd(
            _scaled(hall.get("density_m2"), 1e-15), _scaled(hall.get("density_sd_m2"), 1e-15)
        )
        lines.append(Text(f"  Hall density ({density}) × 10¹⁵ /m²"))
    if problem := finding.get("problem"):
        lines.append(Text(f"  ! {plain(str(problem))}", "bold"))
    return lines


def _orbit(orbit: Mapping[str, Any]) -> str:
    get = orbit.get
    parts = [f"F {with_sd(get('frequency_t'), get('frequency_sd_t'), 'T')}"]
    if get("mass") is None:
        parts.append("mass: wants two temperatures")
    else:
        parts.append(f"m {with_sd(get('mass'), get('mass_sd'), 'mₑ')}")
        parts.append(f"T_D {with_sd(get('dingle_k'), get('dingle_sd_k'), 'K')}")
    ratio = get("signal_to_noise")
    if isinstance(ratio, int | float):
        parts.append(f"S/N {ratio:.0f}")
    return "  ".join(parts)


def _list(value: object) -> Iterable[object]:
    return value if isinstance(value, list) else ()


def _scaled(value: object, factor: float) -> float | None:
    return value * factor if isinstance(value, int | float) else None


def _plot(picture: Picture, width: int, height: int) -> Lines:
    drawn = picture.sweep_trace()
    if drawn is None:
        return []
    name, field_t, ohm = drawn
    x, y, x_name, y_name = field_t, ohm, "field / T", "resistance / ohm"
    if (found := oscillation(field_t, ohm)) is not None:
        (x, y), x_name = found, "1/field / (1/T)"
        y_name = "resistance less a smooth background / ohm"
    lines = plot(x, y, width=width - 2, height=height, x_name=x_name, y_name=y_name)
    if not lines:
        return []
    lines[0] = f"{lines[0]}, {plain(name)}"
    return [Text(line) for line in lines]


def _events(picture: Picture, times: Times, most: int) -> Lines:
    newest = list(picture.events)[-max(1, most - 1) :]
    if not newest:
        return []
    lines = [title("Happened last, the newest first")]
    for event in reversed(newest):
        bold = "bold" if event.event_kind in ("trip", "warning") else ""
        lines.append(Text(f"  {times.at(event.unix_s, seconds=True)}  {event_text(event)}", bold))
    return lines
