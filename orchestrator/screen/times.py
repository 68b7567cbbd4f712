"""Times as a screen tells them: by the clock on the wall, or since the start of a rehearsal."""

import math
from dataclasses import dataclass
from typing import Self

from orchestrator.screen.picture import Picture
from orchestrator.screen.wording import clock

# A night rehearsed at full speed plays in an invented evening of the year 2000, so that two of
# them are equal to the byte. Nothing else is so old.
_SO_OLD_S = 10 * 365.25 * 86400


def plays_in_2000(age_s: float) -> bool:
    """Whether a night whose newest reading has this age was rehearsed at full speed."""
    return age_s > _SO_OLD_S


@dataclass(frozen=True, slots=True)
class Times:
    """How to tell a wall time; ``start_unix_s`` is None where the clock on the wall tells it."""

    start_unix_s: float | None = None

    @classmethod
    def of(cls, picture: Picture, now_unix_s: float) -> Self:
        """Those of a night, looked at now."""
        newest = picture.newest
        if newest is None or not plays_in_2000(now_unix_s - newest.unix_s):
            return cls()
        since_s = newest.time_s - (picture.started_s or 0.0)
        return cls(newest.unix_s - since_s)

    def at(self, unix_s: float, *, seconds: bool = False) -> str:
        """``03:42`` or ``03:42:09`` on the wall; ``2:02:57`` since the start of a rehearsal."""
        if self.start_unix_s is None or not math.isfinite(unix_s):
            return clock(unix_s, seconds=seconds)
        since_s = max(0, round(unix_s - self.start_unix_s))
        return f"{since_s // 3600}:{since_s // 60 % 60:02d}:{since_s % 60:02d}"
