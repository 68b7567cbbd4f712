"""The end of a night on the command line: the table or the JSON object, and the exit code."""

import json
from dataclasses import asdict
from pathlib import Path

from rich.console import Console

from orchestrator.cli.failing import NIGHT_ENDED_EARLY, Failed
from orchestrator.engine.night import NightDone
from orchestrator.report.summary import closing_table, summarise


def close_night(
    folder: Path, done: NightDone, *, wall_s: float, as_json: bool, contact: str = ""
) -> None:
    """Print what the night came to. Raises Failed with exit code 3 if it ended early."""
    summary = summarise(
        folder,
        outcome=done.outcome,
        simulated_s=done.duration_s,
        wall_s=wall_s,
        steps=[asdict(step) for step in done.steps],
    )
    if as_json:
        print(json.dumps(summary.as_json(), indent=2))
    else:
        Console().print(closing_table(summary))
    if done.outcome != "done" or done.parked != "parked":
        rest = "the rig is parked" if done.parked == "parked" else _not_at_rest(done, contact)
        raise Failed(f"the night ended early ({done.outcome}); {rest}", NIGHT_ENDED_EARLY)


def _not_at_rest(done: NightDone, contact: str) -> str:
    whom = f"; call {contact}" if contact else ""
    return f"THE RIG IS NOT AT REST: {done.parked}{whom}"
