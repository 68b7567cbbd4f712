"""Putting a night together: ledger, gate, sentinel, sampler, outlet, and the engine."""

import asyncio
import contextlib
import threading
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from importlib.metadata import version
from pathlib import Path

from orchestrator.bench import Bench, channels_of
from orchestrator.cli.composition import Files
from orchestrator.cli.failing import NIGHT_ENDED_EARLY, Failed
from orchestrator.engine.night import NightDone, run_night
from orchestrator.engine.sampler import Sampler
from orchestrator.engine.work import Outlet, Work
from orchestrator.interlocks.gate import Gate, Trip
from orchestrator.interlocks.sentinel import Sentinel
from orchestrator.ledger.records import NightDescription
from orchestrator.ledger.schema import LedgerError
from orchestrator.ledger.writing import CommitMode, Ledger
from orchestrator.planning.belief import Belief
from orchestrator.planning.expansion import expand
from orchestrator.planning.forecast import forecast
from orchestrator.readings import Reading
from orchestrator.stream.messages import NightState

_STATE_EVERY_S = 2.0

OpenOutlet = Callable[[Ledger], Outlet]


@dataclass(frozen=True)
class Setting:
    """How a night is run, beside what it does.

    Attributes
    ----------
    folder : Path
        Where its ledger is made.
    description : NightDescription
        What the ledger says of it.
    commit : {"each_second", "batched"}
        How readings get to disk.
    clock, wall : Callable[[], float]
        The night's clock, and wall time.
    on_reading : Callable[[Reading], None]
        For a progress display.
    on_trip : Callable[[str], None]
        Told of each trip, in words.
    park_asked : threading.Event
        Set when the person at the keyboard wants the night to park.
    """

    folder: Path
    description: NightDescription
    commit: CommitMode
    clock: Callable[[], float]
    wall: Callable[[], float]
    on_reading: Callable[[Reading], None]
    on_trip: Callable[[str], None]
    park_asked: threading.Event = field(default_factory=threading.Event)


def describe(files: Files, *, night: str, live: bool, started_unix_s: float) -> NightDescription:
    """What the ledger says of a night with these files."""
    return NightDescription(
        night=night,
        rig=files.rig.about.name,
        sequence=files.sequence.about.name,
        mode="live" if live else "rehearsal",
        started_unix_s=started_unix_s,
        program_version=version("nightfield"),
        rig_text=files.rig_document.text,
        sequence_text=files.sequence_document.text,
    )


async def do_night(
    files: Files, bench: Bench, setting: Setting, open_outlet: OpenOutlet
) -> NightDone:
    """Run a night on an opened bench; the ledger is complete on disk when this returns."""
    expected = forecast(files.rig, files.sequence)
    ledger = Ledger.create(
        setting.folder,
        description=setting.description,
        channels=channels_of(files.rig),
        commit=setting.commit,
        clock=setting.clock,
        wall=setting.wall,
    )
    outlet = open_outlet(ledger)
    try:
        work, teller = _assemble(files, bench, setting, ledger, outlet, expected.duration_s)
        done = await run_night(work, expand(files.sequence, files.rig), expected)
        teller.end(done)
    except BaseException as error:
        if isinstance(error, KeyboardInterrupt | asyncio.CancelledError):
            _record_stop(ledger)
        outlet.close()
        ledger.close()
        raise
    try:
        ledger.commit()
        outlet.close()
        ledger.close()
    except LedgerError as error:
        raise Failed(f"{error}; the rig: {done.parked}", NIGHT_ENDED_EARLY) from error
    return done


def _record_stop(ledger: Ledger) -> None:
    """Say in the ledger that a person has stopped the night's process."""
    data = {"outcome": "stopped", "parked": "the magnet was left as it was"}
    with contextlib.suppress(LedgerError):
        ledger.append_event(
            kind="night", name="ended", severity="high", text="stopped at the keyboard", data=data
        )


def _assemble(
    files: Files,
    bench: Bench,
    setting: Setting,
    ledger: Ledger,
    outlet: Outlet,
    expected_s: float,
) -> tuple[Work, "_Teller"]:
    """The parts of a night, each knowing the others that it needs."""
    channels = channels_of(files.rig)
    gate = Gate(bench, files.rig, files.rig_document, ledger, setting.clock)
    sentinel = Sentinel(files.rig, channels, gate, setting.clock)
    teller = _Teller(sentinel, gate, outlet, setting, expected_s)
    sampler = Sampler(
        bench,
        channels,
        ledger,
        sentinel,
        interval_s=files.rig.sampling.interval_s,
        clock=setting.clock,
        wall=setting.wall,
        on_reading=teller.tell,
    )
    work = Work(
        rig=files.rig,
        document=files.rig_document,
        gate=gate,
        sentinel=sentinel,
        sampler=sampler,
        ledger=ledger,
        outlet=outlet,
        clock=setting.clock,
        belief=Belief.from_prior(files.sequence.prior),
        park_asked=setting.park_asked,
    )
    return work, teller


class _Teller:
    """Tells outlet and progress display of each reading, and the night's state now and then."""

    def __init__(
        self,
        sentinel: Sentinel,
        gate: Gate,
        outlet: Outlet,
        setting: Setting,
        expected_s: float,
    ) -> None:
        self._sentinel, self._gate = sentinel, gate
        self._outlet, self._setting = outlet, setting
        self._started_s = setting.clock()
        self._expected_s = max(expected_s, 1.0)
        self._told_s = float("-inf")
        self._state = NightState()
        self._known: list[Trip] = []

    def tell(self, reading: Reading) -> None:
        self._outlet.reading(reading)
        self._setting.on_reading(reading)
        self._tell_trips()
        if reading.time_s - self._told_s < _STATE_EVERY_S and reading.step == self._state.step:
            return
        self._told_s = reading.time_s
        done_s = reading.time_s - self._started_s
        self._state = NightState(
            step=reading.step,
            progress=min(1.0, done_s / self._expected_s),
            expected_end_unix_s=reading.unix_s + max(0.0, self._expected_s - done_s),
            trips=tuple(trip.name for trip in self._gate.trips),
            margins={name: one.margin for name, one in self._sentinel.verdicts.items()},
        )
        self._outlet.state(self._state)

    def _tell_trips(self) -> None:
        trips = [trip for trip in self._gate.trips if trip not in self._known]
        self._known += trips
        for trip in trips:
            self._setting.on_trip(f"TRIP {trip.name}: {trip.text}")

    def end(self, done: NightDone) -> None:
        self._tell_trips()
        trips = tuple(trip.name for trip in self._gate.trips)
        self._outlet.state(
            self._state.model_copy(
                update={"outcome": done.outcome, "progress": 1.0, "trips": trips}
            )
        )


def described_as_rehearsal(
    description: NightDescription, *, seed: int, world_text: str, truth: list[dict[str, float]]
) -> NightDescription:
    """The same description with the seed and the truth of a simulated world."""
    return replace(description, seed=seed, world_text=world_text, truth={"orbits": truth})
