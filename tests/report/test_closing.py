"""The table at the end of a night."""

import io
from typing import Any

from rich.console import Console

from orchestrator.report.summary import Summary, closing_table

FOUND = {
    "frequency_t": 1132.99,
    "frequency_sd_t": 0.0073,
    "mass": 0.4294,
    "mass_sd": 0.0012,
    "dingle_k": 0.6815,
    "dingle_sd_k": 0.0075,
}


def shown(**more: Any) -> str:
    given: dict[str, Any] = {
        "night": "nights/one",
        "outcome": "done",
        "simulated_s": 7380.0,
        "wall_s": 9.1,
        "readings": 7379,
        "steps": [],
        "trips": [],
        "violations": [],
        "findings": [FOUND],
        "truth": None,
        "fingerprint": "",
    }
    file = io.StringIO()
    Console(file=file, width=80).print(closing_table(Summary(**given | more)))
    return file.getvalue()


def test_a_true_orbit_that_was_not_found_is_shown_as_that() -> None:
    """A comparison that leaves out what was missed would flatter the analysis."""
    truth = [
        {"frequency_t": 412.6, "mass": 0.192, "dingle_k": 1.32},
        {"frequency_t": 1133.0, "mass": 0.43, "dingle_k": 0.68},
    ]
    rows = [line.split() for line in shown(truth=truth).splitlines()]
    assert ["truth", "1133", "0.43", "0.68"] in rows
    assert ["not", "found", "412.6", "0.192", "1.32"] in rows


def test_the_uncertainties_are_told_to_be_of_the_scatter_alone() -> None:
    text = " ".join(shown().split())
    assert "one standard deviation, from the scatter of the data alone" in text
    assert "truth" not in text
