"""Event loops for the night's time: jumping for rehearsals, scaled for paced runs.

All time in a night is the running loop's ``time()``. In a rehearsal at full speed the loop jumps to
the next timer whenever nothing is ready, so that a night takes seconds and is repeatable; at a pace
N it runs N times faster than the wall.
"""

import asyncio
import selectors
import time
from collections.abc import Mapping
from typing import Any, Self


class _Selector(selectors.BaseSelector):
    """A selector that waits in the loop's own time."""

    def __init__(self) -> None:
        self._inner = selectors.DefaultSelector()

    def register(self, fileobj: Any, events: int, data: Any = None) -> selectors.SelectorKey:
        return self._inner.register(fileobj, events, data)

    def unregister(self, fileobj: Any) -> selectors.SelectorKey:
        return self._inner.unregister(fileobj)

    def get_map(self) -> Mapping[Any, selectors.SelectorKey]:
        return self._inner.get_map()

    def close(self) -> None:
        self._inner.close()


class _JumpingSelector(_Selector):
    def __init__(self) -> None:
        super().__init__()
        self.now_s = 0.0

    def select(self, timeout: float | None = None) -> list[tuple[selectors.SelectorKey, int]]:
        if timeout is None:  # no timer: only the outside can wake the loop
            return self._inner.select(None)
        ready = self._inner.select(0)
        if not ready and timeout > 0:
            self.now_s += timeout
        return ready


class _PacedSelector(_Selector):
    def __init__(self, pace: float) -> None:
        super().__init__()
        self._pace = pace

    def select(self, timeout: float | None = None) -> list[tuple[selectors.SelectorKey, int]]:
        return self._inner.select(None if timeout is None else timeout / self._pace)


class JumpingLoop(asyncio.SelectorEventLoop):
    """A loop whose time starts at 0 and jumps to the next timer when nothing is ready.

    A call in a thread takes no time of this loop; nothing in a rehearsal at full speed uses one.
    """

    def __init__(self) -> None:
        self._jumping = _JumpingSelector()
        super().__init__(self._jumping)

    def time(self) -> float:
        return self._jumping.now_s


class PacedLoop(asyncio.SelectorEventLoop):
    """A loop whose time starts at 0 and runs ``pace`` times as fast as the wall's."""

    def __new__(cls, pace: float = 1.0) -> Self:
        if not 0 < pace <= 10_000:
            raise ValueError(f"pace {pace:g} is not allowed; above 0 to 10000")
        return super().__new__(cls)

    def __init__(self, pace: float = 1.0) -> None:
        self._pace = pace
        self._start_s = time.monotonic()
        super().__init__(_PacedSelector(pace))

    def time(self) -> float:
        return (time.monotonic() - self._start_s) * self._pace
