"""Where a program's time goes, by rooms of this project, looked at about 250 times a second."""

import signal
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType

_ROOT = str(Path(__file__).parents[2]) + "/"
_TOPS = ("orchestrator", "drivers", "simulators")
_EVERY_S = 0.004  # of this process's own computing time
ELSEWHERE = "event loop and start"


def _room(frame: FrameType | None) -> str:
    """The room whose code is nearest; what it calls in a library counts as its own."""
    while frame is not None:
        name = frame.f_code.co_filename
        if name.startswith(_ROOT):
            parts = name.removeprefix(_ROOT).split("/")
            if parts[0] in _TOPS and parts[1:2] != ["cli"]:
                inner = parts[0] == "orchestrator" and len(parts) > 2
                return "/".join(parts[: 2 if inner else 1])
        frame = frame.f_back
    return ELSEWHERE


@contextmanager
def looked_at() -> Iterator[Counter[str]]:
    """Count looks by room while inside; empty afterwards where the system has no such timer."""
    looks: Counter[str] = Counter()
    if not hasattr(signal, "setitimer"):
        yield looks
        return

    def look(number: int, frame: FrameType | None) -> None:
        looks[_room(frame)] += 1

    before = signal.signal(signal.SIGPROF, look)
    signal.setitimer(signal.ITIMER_PROF, _EVERY_S, _EVERY_S)
    try:
        yield looks
    finally:
        signal.setitimer(signal.ITIMER_PROF, 0)
        signal.signal(signal.SIGPROF, before)
