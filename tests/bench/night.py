"""A whole rehearsal, with every word on the wire: simulated seconds per second of the wall."""

import tempfile
import time
from pathlib import Path

from orchestrator.cli.composition import load_files, load_simulated, shipped
from orchestrator.cli.full_speed import at_full_speed
from orchestrator.ledger.reading import NightReader
from tests.bench.outcome import Outcome
from tests.bench.rooms import looked_at
from tests.bench.timing import Figure


def run(quick: bool) -> Outcome:
    """The overnight ladder; the short evening if quick."""
    name = "short-evening" if quick else "overnight-ladder"
    files = load_files(None, shipped(f"{name}.toml"))
    with tempfile.TemporaryDirectory() as place:
        began_s = time.perf_counter()
        with looked_at() as looks:
            folder, done = at_full_speed(
                files,
                load_simulated(None, files.rig),
                seed=20,
                into=Path(place),
                evening_unix_s=946_756_800.0,
                quiet=True,
            )
        wall_s = time.perf_counter() - began_s
        with NightReader(folder) as night:
            readings = night.last_number()
    outcome = Outcome(
        {
            f"{name}, simulated s": Figure(done.duration_s),
            f"{name}, wall s": Figure(wall_s),
            f"{name}, readings per wall s": Figure(readings / wall_s),
        },
        {f"{name}, simulated s per wall s": Figure(done.duration_s / wall_s)},
    )
    for room, count in looks.most_common():
        outcome.figures[f"of it in {room}, %"] = Figure(100 * count / looks.total())
    return outcome
