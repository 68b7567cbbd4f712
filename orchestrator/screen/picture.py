"""What is known of a night from its messages, as far as a screen needs it."""

import math
from collections import deque
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from orchestrator.stream.messages import (
    EventMessage,
    FindingMessage,
    Message,
    NightState,
    ReadingBatch,
    StateMessage,
)

_RECENT = 40  # readings from which rates are taken
_TRACE_POINTS = 4000  # of one step; beyond that every second one goes
_TRACES = 3
_EVENTS = 60
_LEVEL_EVERY_S = 60.0
_LEVELS = 120


@dataclass(frozen=True, slots=True)
class Newest:
    """The newest reading, and what each channel and instrument last said."""

    number: int
    time_s: float
    unix_s: float
    step: str


@dataclass(frozen=True, slots=True)
class Leg:
    """A stretch of field of the plan, its rate, and the ceiling that binds it."""

    from_t: float
    to_t: float
    rate_t_per_s: float
    binding: str


@dataclass(frozen=True)
class Plan:
    """How the running sweep is meant to go on from the time at which it was planned."""

    step: str
    reason: str
    legs: tuple[Leg, ...]
    duration_s: float
    time_s: float

    def leg_at(self, field_t: float) -> Leg | None:
        """The leg in which a field lies."""
        for leg in self.legs:
            if min(leg.from_t, leg.to_t) <= field_t <= max(leg.from_t, leg.to_t):
                return leg
        return None


@dataclass(frozen=True, slots=True)
class PlannedStep:
    """A step as the forecast saw it, in seconds from the night's start."""

    name: str
    start_s: float
    duration_s: float


class Trace:
    """Field and lock-in voltages of one step, thinned evenly so that it stays within a limit."""

    def __init__(self) -> None:
        self.field_t: list[float] = []
        self.volts: dict[str, list[float]] = {}
        self._stride = 1
        self._skipped = 0

    def append(self, field_t: float, values: Mapping[str, float]) -> None:
        """Add a reading's field and voltages, unless it falls to the thinning."""
        self._skipped += 1
        if self._skipped < self._stride:
            return
        self._skipped = 0
        for name, value in values.items():
            if name.endswith("_x_v"):
                self.volts.setdefault(name, [math.nan] * len(self.field_t)).append(value)
        self.field_t.append(field_t)
        if len(self.field_t) > _TRACE_POINTS:
            for column in (self.field_t, *self.volts.values()):
                del column[::2]
            self._stride *= 2


@dataclass
class Picture:
    """What a screen shows, built up message by message; `take` reads no clock and no file.

    Attributes
    ----------
    night, rig : str
        Whose messages came last; empty before the first. Another night begins a new picture.
    state : NightState or None
        As the night last told it, over a broker.
    newest : Newest or None
        The newest reading.
    values, heard_s : dict
        Channel to its newest value, which may be NaN; instrument to the time of its newest answer.
    last_known : dict
        Channel to the newest value that was one.
    recent : deque
        Night's time, wall time, magnet's time, field and temperature of the newest readings.
    traces : dict
        Step to its trace, for the newest steps.
    levels : dict
        Gauge's channel to times in s and levels in percent, one a minute.
    events : deque
        Newest last, each once.
    trips : dict
        Trips that stand, by name; the event is None where only the state tells of it.
    """

    night: str = ""
    rig: str = ""
    state: NightState | None = None
    newest: Newest | None = None
    values: dict[str, float] = field(default_factory=dict)
    heard_s: dict[str, float] = field(default_factory=dict)
    last_known: dict[str, float] = field(default_factory=dict)
    recent: deque[tuple[float, float, float, float, float]] = field(
        default_factory=lambda: deque(maxlen=_RECENT)
    )
    traces: dict[str, Trace] = field(default_factory=dict)
    levels: dict[str, deque[tuple[float, float]]] = field(default_factory=dict)
    events: deque[EventMessage] = field(default_factory=lambda: deque(maxlen=_EVENTS))
    finding: Mapping[str, Any] | None = None
    plan: Plan | None = None
    started_s: float | None = None
    interval_s: float = 1.0
    forecast_s: float = math.nan
    steps: tuple[PlannedStep, ...] = ()
    step_started: dict[str, EventMessage] = field(default_factory=dict)
    steps_finished: dict[str, str] = field(default_factory=dict)
    ended: EventMessage | None = None
    lock_ins: dict[str, tuple[str, float]] = field(default_factory=dict)
    _last_event: int = 0
    _state_event: int = 0
    _trip_events: dict[str, EventMessage] = field(default_factory=dict)
    _cleared: dict[str, int] = field(default_factory=dict)

    def take(self, message: Message) -> None:
        """Take a message in; what it says wrongly is left aside."""
        if message.night != self.night:
            self.__init__(night=message.night, rig=message.rig)  # type: ignore[misc]
        if isinstance(message, ReadingBatch):
            self._take_readings(message)
        elif isinstance(message, EventMessage):
            self._take_event(message)
        elif isinstance(message, StateMessage):
            self.state, self._state_event = message.state, message.last_event
        elif isinstance(message, FindingMessage):
            self.finding = message.data

    @property
    def trips(self) -> dict[str, EventMessage | None]:
        """Trips that stand, by name, the oldest first."""
        standing: dict[str, EventMessage | None] = {
            name: event
            for name, event in self._trip_events.items()
            if event.seq > self._cleared.get(name, 0)
        }
        for name in self.state.trips if self.state else ():
            if name not in standing and self._cleared.get(name, 0) <= self._state_event:
                standing[name] = None
        return standing

    @property
    def outcome(self) -> str:
        """How the night ended; empty while it runs or is not known to have ended."""
        if self.ended is not None:
            return str(self.ended.data.get("outcome") or self.ended.text or "ended")
        told = self.state.outcome if self.state else "running"
        return "" if told == "running" else told

    @property
    def not_at_rest(self) -> str:
        """Why the rig is not at rest after the night's end; empty if it is, or nothing told."""
        parked = self.ended.data.get("parked") if self.ended else None
        return "" if parked in (None, "parked") else str(parked)

    def longitudinal_ohm(self) -> tuple[str, float] | None:
        """Name of the lock-in that measures the longitudinal resistance, and its newest value."""
        if "longitudinal" not in self.lock_ins:
            return None
        name, excitation_a = self.lock_ins["longitudinal"]
        return name, self.values.get(f"{name}_x_v", math.nan) / excitation_a

    def sweep_trace(self) -> tuple[str, list[float], list[float]] | None:
        """Name, fields in T and resistances in ohm of the newest sweep, thinned."""
        if "longitudinal" not in self.lock_ins:
            return None
        lock_in, excitation_a = self.lock_ins["longitudinal"]
        for name in reversed(self.traces):
            started, trace = self.step_started.get(name), self.traces[name]
            if started is not None and started.data.get("type") == "field-sweep":
                volts = trace.volts.get(f"{lock_in}_x_v", [math.nan] * len(trace.field_t))
                return name, trace.field_t, [value / excitation_a for value in volts]
        return None

    def field_rate_t_per_s(self) -> float:
        """Slope of the newest fields over the magnet's times; NaN where it is not known."""
        points = [(magnet_s, field_t) for _, _, magnet_s, field_t, _ in list(self.recent)[-8:]]
        return slope([one for one in points if all(map(math.isfinite, one))])

    def pace(self) -> float:
        """Wall seconds that pass in a second of the night; 1 unless a rehearsal runs faster."""
        if len(self.recent) < 10:
            return 1.0
        passed_s = self.recent[-1][0] - self.recent[0][0]
        wall_s = self.recent[-1][1] - self.recent[0][1]
        pace = wall_s / passed_s if passed_s > 0 else 1.0
        return 1.0 if abs(pace - 1) < 0.1 or pace <= 0 else pace

    def step_ends_s(self) -> float:
        """Night's time at which the running step should end; NaN where nothing tells."""
        if self.newest is None:
            return math.nan
        step = self.newest.step
        if self.plan is not None and self.plan.step == step:
            return self.plan.time_s + self.plan.duration_s
        planned, started = self.planned_step(step), self.step_started.get(step)
        if planned is None or started is None:
            return math.nan
        return started.time_s + planned.duration_s

    def planned_step(self, name: str) -> PlannedStep | None:
        """A step of the forecast; a way to a sweep's start that is not in it is the sweep's."""
        by_name = {one.name: one for one in self.steps}
        return by_name.get(name) or by_name.get(name.removesuffix("-approach"))

    def night_ends_s(self) -> float:
        """Night's time at which all should be done: what is left of this step, and the rest."""
        if self.started_s is None or self.newest is None:
            return math.nan
        step_ends_s = max(self.step_ends_s(), self.newest.time_s)
        planned = self.planned_step(self.newest.step)
        if planned is None or math.isnan(step_ends_s):
            return self.started_s + self.forecast_s
        return step_ends_s + self.forecast_s - (planned.start_s + planned.duration_s)

    def unix_of(self, time_s: float) -> float:
        """Wall time of a time of the night's clock."""
        if self.newest is None:
            return math.nan
        return self.newest.unix_s + (time_s - self.newest.time_s) * self.pace()

    def _take_readings(self, batch: ReadingBatch) -> None:
        for one in batch.readings():
            if self.newest is not None and one.number <= self.newest.number:
                continue
            self.newest = Newest(one.number, one.time_s, one.unix_s, one.step)
            self.values.update(one.values)
            self.last_known.update(
                (name, value) for name, value in one.values.items() if math.isfinite(value)
            )
            self.heard_s.update(one.taken_s)
            field_t = one.values.get("field_t", math.nan)
            magnet_s = one.taken_s.get("magnet", math.nan)
            kelvin = one.values.get("sample_k", math.nan)
            self.recent.append((one.time_s, one.unix_s, magnet_s, field_t, kelvin))
            if one.step not in self.traces:
                self.traces[one.step] = Trace()
                while len(self.traces) > _TRACES:
                    del self.traces[next(iter(self.traces))]
            self.traces[one.step].append(field_t, one.values)
            for name, value in one.values.items():
                if name.endswith("_percent") and math.isfinite(value):
                    kept = self.levels.setdefault(name, deque(maxlen=_LEVELS))
                    if not kept or one.time_s - kept[-1][0] >= _LEVEL_EVERY_S:
                        kept.append((one.time_s, value))

    def _take_event(self, event: EventMessage) -> None:
        if event.event_kind == "trip":
            self._trip_events[event.name] = event
        elif event.event_kind == "acknowledge":
            self._cleared[event.name] = max(event.seq, self._cleared.get(event.name, 0))
        if event.kind == "alarm" or event.seq <= self._last_event:
            return
        self._last_event = event.seq
        self.events.append(event)
        data = event.data
        if event.event_kind == "night" and event.name == "started":
            self._take_start(event)
        elif event.event_kind == "night" and event.name == "ended":
            self.ended = event
        elif event.event_kind == "step" and data.get("phase") == "started":
            self.step_started[event.name] = event
        elif event.event_kind == "step" and data.get("phase") == "finished":
            self.steps_finished[event.name] = str(data.get("outcome", ""))
        elif event.event_kind == "plan":
            self.plan = _plan_of(event)

    def _take_start(self, event: EventMessage) -> None:
        data = event.data
        self.started_s, self.ended = event.time_s, None
        self.interval_s = number(data.get("interval_s"), 1.0)
        self.forecast_s = number(data.get("forecast_s"))
        self.steps = tuple(
            PlannedStep(str(one.get("name")), number(one.get("start_s")), number(one["duration_s"]))
            for one in _dicts(data.get("steps"))
            if "duration_s" in one
        )
        for one in _dicts(data.get("lock_ins")):
            excitation_a = number(one.get("excitation_a"))
            if excitation_a > 0:
                self.lock_ins[str(one.get("measures"))] = (str(one.get("name")), excitation_a)


def number(value: object, otherwise: float = math.nan) -> float:
    """A number from JSON; what is none gives the other value."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return otherwise
    return float(value)


def slope(points: list[tuple[float, float]]) -> float:
    """Least-squares slope of y over x; NaN for fewer than three points."""
    if len(points) < 3:
        return math.nan
    middle_x = sum(x for x, _ in points) / len(points)
    middle_y = sum(y for _, y in points) / len(points)
    below = sum((x - middle_x) ** 2 for x, _ in points)
    if below == 0:
        return math.nan
    return sum((x - middle_x) * (y - middle_y) for x, y in points) / below


def _dicts(value: object) -> Iterator[dict[str, Any]]:
    if isinstance(value, list):
        yield from (one for one in value if isinstance(one, dict))


def _plan_of(event: EventMessage) -> Plan:
    legs = event.data.get("legs")
    return Plan(
        step=event.name,
        reason=str(event.data.get("reason", event.text)),
        legs=tuple(
            Leg(number(one[0]), number(one[1]), number(one[2]), str(one[3]))
            for one in (legs if isinstance(legs, list) else ())
            if isinstance(one, list) and len(one) == 4
        ),
        duration_s=number(event.data.get("duration_s")),
        time_s=event.time_s,
    )
