"""From messages of the stream to sweeps: which readings belong to which finished field sweep.

Readings and events come by topics of their own, in no order between the two, so a sweep is cut
when its end is known and its last reading is there. Readings before that are let go.
"""

import math
from array import array
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, TypeGuard

import numpy as np
import numpy.typing as npt

from orchestrator.analysis.sweeps import Sweep
from orchestrator.stream.messages import EventMessage, Message, ReadingBatch, StateMessage

FloatArray = npt.NDArray[np.float64]

_MOST_SWEEPS = 1000  # in a night
_MOST_ROWS = 4_000_000  # readings kept for sweeps that have not ended; the oldest half goes
_KEPT_ENDINGS = ("_x_v", "_overload")


@dataclass(frozen=True, slots=True)
class LockInSettings:
    """What the night says of a lock-in: excitation in ampere, time constant in seconds."""

    name: str
    excitation_a: float
    time_constant_s: float
    poles: int


@dataclass(frozen=True, slots=True)
class EndedSweep:
    """A field sweep that has ended: its name, first and last reading, both included."""

    name: str
    first: int
    last: int


@dataclass(frozen=True)
class CutSweep:
    """The readings of one sweep.

    Attributes
    ----------
    name : str
        The step's name.
    longitudinal : Sweep or None
        Rows in which field, temperature and the longitudinal lock-in are there and not overloaded.
    hall : Sweep or None
        Those of them in which the Hall lock-in is there as well.
    problem : str
        Why there is no longitudinal sweep; empty if there is.
    hall_problem : str
        That the Hall lock-in was overloaded or silent for most of the sweep; empty if it was not.
    """

    name: str
    longitudinal: Sweep | None
    hall: Sweep | None = None
    problem: str = ""
    hall_problem: str = ""


class Gathering:
    """Keeps the columns that the analysis needs, and cuts sweeps out of them.

    Nothing that comes raises: what does not fit is left aside.
    """

    def __init__(self) -> None:
        self.night = ""
        self._begin("")

    def _begin(self, night: str) -> None:
        self.night = night
        self._numbers: array[int] = array("q")
        self._columns: dict[str, array[float]] = {}
        self._lock_ins: dict[str, LockInSettings] = {}
        self._waiting: list[EndedSweep] = []
        self._seen: set[EndedSweep] = set()
        self._last_number = 0
        self._ledger_last = 0

    def take(self, message: Message) -> list[CutSweep]:
        """Take a message; returns the sweeps that are complete by it, in their order."""
        if message.night != self.night:
            self._begin(message.night)
        if isinstance(message, ReadingBatch):
            self._take_readings(message)
        elif isinstance(message, EventMessage) and message.kind == "event":
            self._take_event(message)
        elif isinstance(message, StateMessage):
            self._ledger_last = max(self._ledger_last, message.last_reading)
            return []
        else:
            return []
        return self._complete()

    @property
    def catching_up(self) -> bool:
        """Whether an ended sweep's readings are in the ledger and have yet to come here."""
        return any(sweep.last <= self._ledger_last for sweep in self._waiting)

    def _take_readings(self, batch: ReadingBatch) -> None:
        kept = [
            (name, at)
            for at, (name, _, _) in enumerate(batch.channels)
            if name in ("field_t", "sample_k") or name.endswith(_KEPT_ENDINGS)
        ]
        instruments = tuple(dict.fromkeys(instrument for _, _, instrument in batch.channels))
        names = {"time_s", *(name for name, _ in kept), *map(_taken, instruments)}
        for name in names - self._columns.keys():
            self._columns[name] = array("d", [math.nan]) * len(self._numbers)
        absent = self._columns.keys() - names
        for number, time_s, _, _, values, taken in batch.rows:
            if number <= self._last_number:
                continue
            self._last_number = number
            self._numbers.append(number)
            self._columns["time_s"].append(time_s)
            for name, at in kept:
                value = values[at]
                self._columns[name].append(math.nan if value is None else value)
            for instrument, taken_s in zip(instruments, taken, strict=True):
                self._columns[_taken(instrument)].append(math.nan if taken_s is None else taken_s)
            for name in absent:
                self._columns[name].append(math.nan)
        if len(self._numbers) > _MOST_ROWS:
            self._let_go(len(self._numbers) // 2)

    def _take_event(self, event: EventMessage) -> None:
        data = event.data
        if event.event_kind == "night" and event.name == "started":
            self._lock_ins = _lock_ins_of(data)
        elif (
            event.event_kind == "step"
            and data.get("phase") == "finished"
            and data.get("type") == "field-sweep"
        ):
            first, last = data.get("first_reading"), data.get("last_reading")
            if not (_is_count(first) and _is_count(last)):
                return
            sweep = EndedSweep(event.name, int(first), int(last))
            new = sweep not in self._seen and len(self._seen) < _MOST_SWEEPS
            if new and sweep.first <= sweep.last:
                self._seen.add(sweep)
                self._waiting.append(sweep)

    def _complete(self) -> list[CutSweep]:
        ready = [sweep for sweep in self._waiting if sweep.last <= self._last_number]
        if not ready:
            return []
        cuts = [self._cut(sweep) for sweep in ready]
        for sweep in ready:
            self._waiting.remove(sweep)
        last = max(sweep.last for sweep in ready)
        needed = min((sweep.first for sweep in self._waiting), default=last + 1)
        self._let_go(int(np.searchsorted(self._numbers, min(needed, last + 1))))
        return cuts

    def _let_go(self, count: int) -> None:
        del self._numbers[:count]
        for column in self._columns.values():
            del column[:count]

    def _cut(self, ended: EndedSweep) -> CutSweep:
        first, behind = np.searchsorted(self._numbers, [ended.first, ended.last + 1])
        rows = {name: np.array(one[first:behind]) for name, one in self._columns.items()}
        lock_in = self._lock_ins.get("longitudinal")
        if lock_in is None:
            return CutSweep(ended.name, None, problem="the night named no longitudinal lock-in")
        for name in ("field_t", "sample_k", f"{lock_in.name}_x_v"):
            if name not in rows:
                return CutSweep(ended.name, None, problem=f"the readings have no {name}")
        # Each instrument answers at a time of its own: the field is taken at the lock-in's.
        time = _times(rows, lock_in.name)
        field_time, field = _times(rows, "magnet"), rows["field_t"]
        known = np.isfinite(field_time) & np.isfinite(field)
        good = known & _good(rows, lock_in) & np.isfinite(time) & (rows["sample_k"] > 0)
        good &= _rising(time, good)
        if int(good.sum()) < 2:
            text = f"{int(good.sum())} of {good.size} readings can be used"
            return CutSweep(ended.name, None, problem=text)
        order = np.flatnonzero(known)[np.argsort(field_time[known], kind="stable")]
        at_lock_in = np.interp(time, field_time[order], field[order])

        def sweep(chosen: npt.NDArray[np.bool_], hall_ohm: FloatArray | None) -> Sweep:
            of_field = at_lock_in[chosen]
            return Sweep(
                name=ended.name,
                direction=1 if abs(of_field[-1]) > abs(of_field[0]) else -1,
                time_s=time[chosen],
                field_t=of_field,
                temperature_k=rows["sample_k"][chosen],
                resistance_ohm=rows[f"{lock_in.name}_x_v"][chosen] / lock_in.excitation_a,
                hall_ohm=hall_ohm,
                time_constant_s=lock_in.time_constant_s,
                poles=lock_in.poles,
            )

        hall, of_hall, hall_problem = self._lock_ins.get("hall"), None, ""
        if hall is not None and f"{hall.name}_x_v" in rows:
            both = good & _good(rows, hall)
            used, most = int(both.sum()), int(good.sum())
            if 2 * used < most:
                hall_problem = f"{hall.name} overloaded or silent in {most - used} of {most}"
            if used >= 2:
                of_hall = sweep(both, rows[f"{hall.name}_x_v"][both] / hall.excitation_a)
        return CutSweep(ended.name, sweep(good, None), of_hall, hall_problem=hall_problem)


def _taken(instrument: str) -> str:
    return f"{instrument}_taken_s"


def _times(rows: Mapping[str, FloatArray], instrument: str) -> FloatArray:
    """When an instrument answered; the reading's own time where the night does not say."""
    return rows.get(_taken(instrument), rows["time_s"])


def _good(rows: Mapping[str, FloatArray], lock_in: LockInSettings) -> npt.NDArray[np.bool_]:
    good = np.isfinite(rows[f"{lock_in.name}_x_v"])
    overload = rows.get(f"{lock_in.name}_overload")
    return good if overload is None else good & (overload == 0)


def _rising(time: FloatArray, good: npt.NDArray[np.bool_]) -> npt.NDArray[np.bool_]:
    """True where a good row's time is beyond that of every good row before."""
    usable = np.where(good & np.isfinite(time), time, -np.inf)
    before = np.concatenate(([-np.inf], np.maximum.accumulate(usable)[:-1]))
    return usable > before


def _is_count(value: object) -> TypeGuard[int | float]:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    return math.isfinite(value) and value == int(value) and 1 <= value < 2**62


def _is_positive(value: object) -> TypeGuard[int | float]:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return False
    return math.isfinite(value) and value > 0


def _lock_ins_of(data: Mapping[str, Any]) -> dict[str, LockInSettings]:
    """The first usable lock-in of each kind of measurement."""
    entries = data.get("lock_ins")
    found: dict[str, LockInSettings] = {}
    for entry in entries if isinstance(entries, list) else ():
        if not isinstance(entry, dict):
            continue
        name, measures = entry.get("name"), entry.get("measures")
        excitation, tau = entry.get("excitation_a"), entry.get("time_constant_s")
        poles = entry.get("poles")
        if not (isinstance(name, str) and isinstance(measures, str) and measures not in found):
            continue
        if not (_is_positive(excitation) and _is_positive(tau) and _is_count(poles)):
            continue
        if int(poles) <= 4:
            found[measures] = LockInSettings(name, float(excitation), float(tau), int(poles))
    return found
