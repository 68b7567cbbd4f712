"""The trips that stand, and how a person clears them."""

import textwrap

from rich.text import Text

from orchestrator.screen.picture import Picture
from orchestrator.screen.rows import Lines, title
from orchestrator.screen.times import Times
from orchestrator.screen.wording import plain

_MOST = 4
_HOW = "to clear one: nightfield acknowledge NIGHT TRIP --reason WHY"


def standing_trips(picture: Picture, times: Times, width: int) -> Lines:
    """Each trip with its time, its answer and its reason; empty if none stands."""
    trips = picture.trips
    if not trips:
        return []
    if picture.outcome:
        lines = [title("Trips that stood at the end")]
    elif len(_HOW) + 20 <= width:
        lines = [title(f"Trips that stand; {_HOW}")]
    else:
        lines = [title("Trips that stand"), Text(f" {_HOW}")]
    for name, event in list(trips.items())[:_MOST]:
        if event is None:
            lines.append(Text(f"  {plain(name)}", "bold"))
            continue
        answer = f"  {times.at(event.unix_s, seconds=True)}  answered by {plain(event.severity)}"
        lines.append(Text.assemble((f"  {plain(name)}", "bold"), answer))
        lines += [Text(f"    {one}") for one in textwrap.wrap(plain(event.text), width - 4)[:2]]
    if len(trips) > _MOST:
        lines.append(Text(f"  and {len(trips) - _MOST} more"))
    return lines
