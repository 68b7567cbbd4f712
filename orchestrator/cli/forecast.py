"""``nightfield forecast``: what a night will take and yield, before anything moves."""

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from orchestrator.cli.failing import input_errors
from orchestrator.cli.options import AsJson, RigPath, SequencePath

if TYPE_CHECKING:
    from orchestrator.planning.forecast import Forecast


_WIDE = 76  # characters; a narrower terminal goes without the samples of a period


def forecast(sequence: SequencePath = None, rig: RigPath = None, as_json: AsJson = False) -> None:
    """Say how long a night will take, and what limits each sweep; no instrument is touched.

    Example: nightfield forecast overnight.toml --rig rig.toml
    """
    with input_errors():
        from orchestrator.cli.composition import load_files
        from orchestrator.planning.cautions import cautions
        from orchestrator.planning.forecast import forecast as plan

        files = load_files(rig, sequence)
        expected = plan(files.rig, files.sequence)
        warnings = cautions(files.rig)
    if as_json:
        print(json.dumps(_as_json(expected, warnings), indent=2))
        return
    _show(f"{files.sequence.about.name} on {files.rig.about.name}", expected, warnings)


def _as_json(expected: "Forecast", warnings: list[str]) -> dict[str, Any]:
    keys = ("name", "start_s", "duration_s", "samples", "samples_per_period_min", "binding")
    steps = [{key: asdict(step)[key] for key in keys} for step in expected.steps]
    return {
        "duration_s": expected.duration_s,
        "constant_rate_duration_s": expected.constant_rate_duration_s,
        "steps": steps,
        "cautions": warnings,
    }


def _show(name: str, expected: "Forecast", warnings: list[str]) -> None:
    from rich.box import SIMPLE
    from rich.console import Console
    from rich.table import Table

    from orchestrator.units import duration_text

    console = Console()
    wide = console.width >= _WIDE
    table = Table(title=f"Forecast of {name}", title_justify="left", box=SIMPLE)
    table.show_edge, table.pad_edge, table.collapse_padding = False, False, True
    table.add_column("step", no_wrap=True)
    for heading in ("starts at", "takes", *(["per period"] if wide else [])):
        table.add_column(heading, justify="right", no_wrap=True)
    table.add_column("limited by", overflow="fold")
    for step in expected.steps:
        shares = sorted(step.binding.items(), key=lambda item: -item[1])
        binding = "\n".join(f"{100 * share:.0f} % {who}" for who, share in shares if share > 0.005)
        least = step.samples_per_period_min
        table.add_row(
            step.name,
            duration_text(step.start_s),
            duration_text(step.duration_s),
            *(["" if least is None else f"{least:.1f}"] if wide else []),
            binding,
        )
    console.print(table)
    if wide:
        console.print("\nper period: least number of samples in the shortest period predicted")
    console.print()
    console.print(
        f"The night takes {duration_text(expected.duration_s)}. At one constant rate, with the "
        "same samples per period, it would take "
        f"{duration_text(expected.constant_rate_duration_s)}."
    )
    console.print("\nCautions", style="bold")
    for warning in warnings:
        console.print(f"- {warning}")
