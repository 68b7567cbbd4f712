"""The analysis of a ladder: what the analyst does after a sweep, against the time of that sweep."""

from functools import partial

from orchestrator.analysis.ladder import analyse_ladder
from tests.analysis.simulated import HEAVY, LIGHT, fields, simulated_ladder
from tests.bench.outcome import Outcome
from tests.bench.timing import in_turn, timed


def run(quick: bool) -> Outcome:
    """Two orbits, three sweeps; and eight longer ones unless quick."""
    short = simulated_ladder(1, fields(6.0, 12.0, 1250.0, 5e-3), (0.5, 1.0, 2.0), (LIGHT, HEAVY))
    ways = {"3": short}
    if not quick:
        kelvin = (0.4, 0.6, 0.8, 1.0, 1.4, 2.0, 2.8, 4.0)
        ways["8"] = simulated_ladder(1, fields(3.5, 12.0, 1250.0, 5e-3), kelvin, (LIGHT, HEAVY))
    spent = in_turn(
        {name: timed(partial(analyse_ladder, sweeps)) for name, sweeps in ways.items()},
        2 if quick else 3,
    )
    outcome = Outcome()
    for name, sweeps in ways.items():
        points = sweeps[0].field_t.size
        outcome.figures[f"analysis of {name} sweeps of {points} points, s"] = spent[name].seconds()
        ratio = spent[name].into(points)  # a point a second
        outcome.ratios[f"time of one sweep / analysis of {name} sweeps"] = ratio
    return outcome
