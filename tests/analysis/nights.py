"""Simulated sweeps as a night's readings and events, for tests of the analyst."""

import math
from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np

from orchestrator.analysis.sweeps import Sweep
from orchestrator.ledger.records import EventRecord
from orchestrator.readings import Channel, Reading
from orchestrator.stream.messages import EventMessage, ReadingBatch
from tests.analysis.simulated import HEAVY, LIGHT, fields, simulated_ladder

CHANNELS = (
    Channel("field_t", "T", "magnet"),
    Channel("sample_k", "K", "stage"),
    Channel("rxx_x_v", "V", "rxx"),
    Channel("rxx_overload", "", "rxx"),
    Channel("rxy_x_v", "V", "rxy"),
    Channel("rxy_overload", "", "rxy"),
    Channel("helium_percent", "", "helium"),
)
EXCITATION_A = 2e-6
HALL_OHM_PER_T = -3.0
STARTED: dict[str, Any] = {
    "lock_ins": [
        {
            "name": name,
            "measures": measures,
            "excitation_a": EXCITATION_A,
            "time_constant_s": 0.3,
            "poles": 4,
        }
        for name, measures in (("rxx", "longitudinal"), ("rxy", "hall"))
    ],
    "interval_s": 1.0,
}
BEFORE = 5  # readings before each sweep


def two_orbit_sweeps(seed: int = 1, temperatures_k: Sequence[float] = (0.4, 3.0)) -> list[Sweep]:
    """Sweeps over 6 to 12 T of a light and a heavy orbit, about 1200 points each."""
    field = fields(6.0, 12.0, 1130.0, 0.3 / 60)
    return simulated_ladder(seed, field, tuple(temperatures_k), (LIGHT, HEAVY))


def night_readings(sweeps: Sequence[Sweep], *, late_s: float = 0.0) -> list[Reading]:
    """Readings of the sweeps one after the other, some at rest before each.

    The lock-ins answer `late_s` after the time of the sweep's sample, all others at the reading's
    time, which is before the sample by as much.
    """
    readings: list[Reading] = []
    random = np.random.default_rng(5)

    def append(step: str, time_s: float, field_t: float, sample_k: float, ohm: float) -> None:
        hall = HALL_OHM_PER_T * field_t + 0.7 + 0.05 * random.normal()
        values = {
            "field_t": field_t,
            "sample_k": sample_k,
            "rxx_x_v": ohm * EXCITATION_A,
            "rxx_overload": 0.0,
            "rxy_x_v": hall * EXCITATION_A,
            "rxy_overload": 0.0,
            "helium_percent": 80.0,
        }
        taken = {"magnet": time_s, "stage": time_s, "helium": time_s}
        taken |= {"rxx": time_s + late_s, "rxy": time_s + late_s}
        readings.append(Reading(len(readings) + 1, time_s, 1.9e9 + time_s, step, values, taken))

    time_s = 10.0
    for number, sweep in enumerate(sweeps, 1):
        for _ in range(BEFORE):
            append("settle", time_s, float(sweep.field_t[0]), float(sweep.temperature_k[0]), 0.0)
            time_s += 1.0
        then = np.interp(sweep.time_s - late_s, sweep.time_s, sweep.field_t)
        for at in range(sweep.time_s.size):
            temperature, ohm = float(sweep.temperature_k[at]), float(sweep.resistance_ohm[at])
            append(f"sweep-{number}", time_s, float(then[at]), temperature, ohm)
            time_s += 1.0
    return readings


def night_events(sweeps: Sequence[Sweep]) -> list[EventRecord]:
    """The night's start, and the start and end of each sweep."""
    events = [EventRecord(1, 0.0, 1.9e9, "night", "started", "info", "", STARTED)]
    last = 0
    for number, sweep in enumerate(sweeps, 1):
        first, last = last + BEFORE + 1, last + BEFORE + sweep.time_s.size
        data = {"type": "field-sweep", "first_reading": first}
        name = f"sweep-{number}"
        for more in ({"phase": "started"}, {"phase": "finished", "last_reading": last}):
            record = EventRecord(
                len(events) + 1, 10.0 + last, 1.9e9, "step", name, "info", "", data | more
            )
            events.append(record)
    return events


def batches(readings: Sequence[Reading], size: int = 200) -> Iterator[ReadingBatch]:
    """The readings as messages."""
    for at in range(0, len(readings), size):
        yield ReadingBatch.of(readings[at : at + size], CHANNELS, night="one", rig="cellar")


def event_messages(events: Sequence[EventRecord]) -> list[EventMessage]:
    """The events as messages."""
    return [EventMessage.of(event, night="one", rig="cellar") for event in events]


NAN = math.nan
