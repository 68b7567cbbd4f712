"""How long a forecast takes: the planning alone, and the command with its start."""

import subprocess
import sys

from orchestrator.cli.composition import load_files, shipped
from orchestrator.planning.forecast import forecast
from tests.bench.outcome import Outcome
from tests.bench.timing import in_turn, timed


def run(quick: bool) -> Outcome:
    """Of the overnight ladder."""
    path = shipped("overnight-ladder.toml")
    files = load_files(None, path)

    def command(*arguments: str) -> None:
        start = [sys.executable, "-m", "orchestrator.cli.main", *arguments]
        subprocess.run(start, check=True, capture_output=True)

    spent = in_turn(
        {
            "planning": timed(lambda: forecast(files.rig, files.sequence)),
            "command": timed(lambda: command("forecast", str(path))),
            "bare interpreter": timed(
                lambda: subprocess.run([sys.executable, "-c", ""], check=True)
            ),
        },
        2 if quick else 7,
    )
    night_s = forecast(files.rig, files.sequence).duration_s
    return Outcome(
        {f"forecast of overnight-ladder, {name}, s": one.seconds() for name, one in spent.items()},
        {"forecast night s / planning s": spent["planning"].into(night_s)},
    )
