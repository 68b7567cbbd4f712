"""A progress display for a night that runs in the foreground."""

import contextlib
import math
import sys
from types import TracebackType
from typing import Self

from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

from orchestrator.readings import Reading
from orchestrator.units import duration_text

_EVERY = 25


class NightProgress:
    """A bar over the forecast's duration, with step, field and temperature; silent if told so."""

    def __init__(self, expected_s: float, *, quiet: bool, every: int = _EVERY) -> None:
        self._expected_s = expected_s
        self._every = every
        self._progress = Progress(
            TextColumn("{task.description}"),
            BarColumn(bar_width=24),
            TextColumn("{task.fields[state]}"),
            TimeRemainingColumn(),
            console=Console(file=sys.stderr),
            transient=True,
            disable=quiet or not sys.stderr.isatty(),
        )
        self._task = self._progress.add_task("ready", total=expected_s, state="")
        self._step = ""

    def __enter__(self) -> Self:
        self._progress.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        with contextlib.suppress(OSError, ValueError):
            self._progress.stop()

    def say(self, text: str) -> None:
        """Say something on standard error, above the bar if there is one.

        A terminal that has gone is no reason for a night to end: then nothing is said.
        """
        console = self._progress.console
        with contextlib.suppress(OSError, ValueError):
            console.print(text, markup=False, highlight=False, soft_wrap=not console.is_terminal)

    def tell(self, reading: Reading) -> None:
        """Show a reading."""
        if reading.number % self._every and reading.step == self._step:
            return
        self._step = reading.step
        field, sample = (
            f"{round(value, 3) + 0.0:{width}.3f}" if math.isfinite(value) else f"{'-':>{width}}"
            for value, width in ((reading.values["field_t"], 7), (reading.values["sample_k"], 6))
        )
        of = f"{duration_text(reading.time_s)} of {duration_text(self._expected_s)}"
        with contextlib.suppress(OSError, ValueError):
            self._progress.update(
                self._task,
                description=f"{reading.step:<18}",
                completed=min(reading.time_s, self._expected_s),
                state=f"{field} T {sample} K  {of}",
            )
