"""A night in real processes: instruments on their links, broker and analyst beside it."""

import asyncio
import signal
import tempfile
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from types import FrameType

from drivers.opening import visa_manager
from orchestrator.bench import Bench, open_bench
from orchestrator.children import start_child
from orchestrator.cli.claims import claimed
from orchestrator.cli.composition import Files, Simulated, addresses_of, truth_of
from orchestrator.cli.failing import INTERRUPTED, Failed
from orchestrator.cli.folders import new_folder
from orchestrator.cli.nights import Setting, describe, described_as_rehearsal, do_night
from orchestrator.cli.outlets import BrokerOutlet
from orchestrator.cli.processes import Beside, end_process, wait_for_file
from orchestrator.cli.progress import NightProgress
from orchestrator.config.rig import load_rig
from orchestrator.engine.clock import PacedLoop
from orchestrator.engine.night import NightDone
from orchestrator.ledger.records import NightDescription
from orchestrator.planning.forecast import forecast
from orchestrator.stream.address import BrokerAddress

SIMULATED = "SIMULATED"


def live_night(
    files: Files,
    *,
    into: Path,
    pace: float,
    quiet: bool,
    change: Callable[[NightDescription], NightDescription] = lambda given: given,
) -> tuple[Path, NightDone]:
    """Run a night on the rig's own addresses; returns its folder and what became of it.

    Ctrl-C asks the night to park; a second one is left to the operating system. Another night on
    one of the instruments is refused.
    """
    expected_s = forecast(files.rig, files.sequence).duration_s
    asked = threading.Event()

    async def night(
        progress: NightProgress, tell_claim: Callable[[str], None]
    ) -> tuple[Path, NightDone]:
        bench = await open_bench(files.rig, files.rig_document, visa_manager(), inline=False)
        try:
            await _prove_pace(bench, pace)
            folder = new_folder(into, files.sequence.about.name)
            tell_claim(f"night {folder.resolve()}")
            with Beside(files.rig.about.name) as beside:
                progress.say(f"night {folder}, stream on 127.0.0.1:{beside.port}")
                description = change(
                    describe(files, night=folder.name, live=True, started_unix_s=time.time())
                )
                setting = Setting(
                    folder=folder,
                    description=replace(description, broker=f"127.0.0.1:{beside.port}"),
                    commit="each_second",
                    clock=asyncio.get_running_loop().time,
                    wall=time.time,
                    on_reading=progress.tell,
                    on_trip=progress.say,
                    park_asked=asked,
                )
                address = BrokerAddress(port=beside.port)
                rig = files.rig.about.name
                done = await do_night(
                    files,
                    bench,
                    setting,
                    lambda ledger: BrokerOutlet(address, rig, folder.name, ledger),
                )
            return folder, done
        finally:
            await bench.close()

    with (
        claimed(addresses_of(files.rig)) as tell_claim,
        NightProgress(expected_s, quiet=quiet, every=max(1, int(pace / 2))) as progress,
        _parking_on_interrupt(asked, progress.say),
        asyncio.Runner(loop_factory=lambda: PacedLoop(pace)) as runner,
    ):
        try:
            return runner.run(night(progress, tell_claim))
        except KeyboardInterrupt:
            text = "stopped at once: THE MAGNET IS LEFT AS IT IS, and nothing watches it"
            raise Failed(text, INTERRUPTED) from None


async def _prove_pace(bench: Bench, pace: float) -> None:
    """Only simulated instruments may be run faster than real time."""
    identities = await bench.identities()
    real = [name for name, reply in identities.items() if SIMULATED not in reply.upper()]
    if pace != 1 and real:
        raise Failed(
            f"--pace {pace:g} is not allowed: {', '.join(real)} is not simulated "
            f"(it answers {identities[real[0]]!r}); real instruments run at pace 1"
        )


@contextmanager
def _parking_on_interrupt(asked: threading.Event, say: Callable[[str], None]) -> Iterator[None]:
    """Let the first Ctrl-C, or a request to end, ask the night to park; the second does as ever.

    A terminal that is closed, or a connection that is cut, ends no night: it goes on without.
    """
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    signals = (signal.SIGINT, signal.SIGTERM)
    usual = {number: signal.getsignal(number) for number in signals}

    def ask(number: int, frame: FrameType | None) -> None:
        asked.set()
        signal.signal(number, usual[signal.Signals(number)])
        say("parking; once more to stop at once and leave the magnet as it is")

    for number in signals:
        signal.signal(number, ask)
    closed = getattr(signal, "SIGHUP", None)  # not on Windows
    before = None if closed is None else signal.signal(closed, signal.SIG_IGN)
    try:
        yield
    finally:
        if closed is not None:
            signal.signal(closed, before)
        for number in signals:
            signal.signal(number, usual[number])


def rehearse_at_pace(
    files: Files, simulated: Simulated, *, seed: int, into: Path, pace: float, quiet: bool
) -> tuple[Path, NightDone]:
    """A rehearsal with the real processes, the simulated rig in one of its own, on sockets."""
    with tempfile.TemporaryDirectory() as place:
        rig_file, live_file = Path(place, "rig.toml"), Path(place, "live.toml")
        world_file = Path(place, "world.toml")
        rig_file.write_text(files.rig_document.text, encoding="utf-8")
        world_file.write_text(simulated.document.text, encoding="utf-8")
        arguments = ["simulate", str(rig_file), "--write-rig", str(live_file), "--owned"]
        arguments += ["--world", str(world_file), "--seed", str(seed), "--pace", f"{pace:g}"]
        simulation = start_child("orchestrator.cli.main", arguments)
        try:
            if not wait_for_file(live_file, simulation):
                raise Failed("the simulated rig did not start", 1)
            rig, document = load_rig(live_file)
            assert addresses_of(rig).keys() == addresses_of(files.rig).keys()
            return live_night(
                replace(files, rig=rig, rig_document=document),
                into=into,
                pace=pace,
                quiet=quiet,
                change=lambda given: described_as_rehearsal(
                    replace(given, mode="rehearsal"),
                    seed=seed,
                    world_text=simulated.document.text,
                    truth=truth_of(simulated.world),
                ),
            )
        finally:
            end_process(simulation)
