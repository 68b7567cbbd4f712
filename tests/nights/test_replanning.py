"""What the analyst finds shapes the next plan, and a wrong prior does not spoil the night."""

from pathlib import Path

import pytest

from orchestrator.analysis.analyst import find_in_ledger
from orchestrator.ledger.requests import write_request
from tests.nights.rehearsing import TINY, rehearse

BOTH = TINY.replace("5.5 T", "4.5 T").replace(
    'orbits = [{ frequency = "460 T", mass = 0.17, dingle = "1.5 K" }]',
    'orbits = [{ frequency = "460 T", mass = 0.17, dingle = "1.5 K" },'
    ' { frequency = "1250 T", mass = 0.38, dingle = "0.8 K" }]',
)


def test_the_second_sweep_is_planned_with_what_the_first_has_shown(tmp_path: Path) -> None:
    night = rehearse(tmp_path, sequence=BOTH)
    plans = [one.data for one in night.reader.events() if one.kind == "plan"]
    assert [one["step"] for one in plans] == ["sweep-1", "sweep-2"]
    prior, found = ([orbit[0] for orbit in plan["orbits"]] for plan in plans)
    assert prior == pytest.approx([460.0, 1250.0])
    assert found == pytest.approx([412.6, 1133.0], rel=0.01)
    assert plans[1]["duration_s"] < plans[0]["duration_s"]
    assert len(night.reader.findings()) == 2


def test_a_prior_that_is_a_third_too_low_is_corrected_and_nothing_is_lost(tmp_path: Path) -> None:
    wrong = BOTH.replace("460 T", "300 T").replace("1250 T", "800 T")
    night = rehearse(tmp_path, sequence=wrong)
    assert (night.done.outcome, night.violations) == ("done", [])
    orbits = night.reader.findings()[-1].data["orbits"]
    assert sorted(orbit["frequency_t"] for orbit in orbits) == pytest.approx(
        [412.6, 1133.0], rel=0.01
    )


@pytest.mark.parametrize(
    ("from_t", "to_t", "direction"),
    [("6.5 T", "5.5 T", "as-given"), ("-5.5 T", "-6.5 T", "as-given"), ("5.5 T", "6.5 T", "both")],
)
def test_sweeps_down_at_negative_fields_and_both_ways_are_safe(
    tmp_path: Path, from_t: str, to_t: str, direction: str
) -> None:
    text = TINY.replace('from = "5.5 T"', f'from = "{from_t}"').replace(
        'to = "6.5 T"', f'to = "{to_t}"'
    )
    text = text.replace('direction = "nearest"', f'direction = "{direction}"')
    night = rehearse(tmp_path, sequence=text.replace(', "1 K"', ""))
    assert (night.done.outcome, night.done.parked) == ("done", "parked")
    assert night.trips == []
    assert night.violations == []
    for one in night.reader.events():
        if one.kind == "step" and one.data.get("type") == "field-sweep":
            fields = [
                reading.values["field_t"]
                for reading in night.reader.readings()
                if reading.step == one.name
            ]
            low, high = sorted((one.data["from_t"], one.data["to_t"]))
            assert min(fields) == pytest.approx(low, abs=0.02)
            assert max(fields) == pytest.approx(high, abs=0.02)


def test_a_sweep_that_is_cut_short_still_tells_what_it_saw(tmp_path: Path) -> None:
    # From 6.5 T down to 4.5 T; the rig is asked to park when most of the way is done.
    one_sweep = BOTH.replace(', "1 K"', "").replace('"nearest"', '"as-given"')
    one_sweep = one_sweep.replace('from = "4.5 T"', 'from = "6.5 T"').replace(
        'to = "6.5 T"', 'to = "4.5 T"'
    )
    for place in ("whole", "cut"):
        (tmp_path / place).mkdir()
    whole = rehearse(tmp_path / "whole", sequence=one_sweep)
    sweep = next(one for one in whole.reader.events() if one.kind == "plan")
    cut_s = sweep.time_s + 0.6 * sweep.data["duration_s"]

    def ask(world, panels, loop):  # type: ignore[no-untyped-def]
        def park() -> None:
            folder = next((tmp_path / "cut" / "nights").iterdir())
            write_request(folder, "park", name="", reason="late", person="A. Keeper", unix_s=0.0)

        loop.call_at(cut_s, park)

    night = rehearse(tmp_path / "cut", sequence=one_sweep, faults=ask)
    assert (night.done.outcome, night.done.parked) == ("park", "parked")
    ended = [
        one.data
        for one in night.reader.events()
        if one.kind == "step" and one.data.get("phase") == "finished" and one.name == "sweep-1"
    ]
    assert ended[0]["outcome"] == "interrupted"
    assert ended[0]["last_reading"] - ended[0]["first_reading"] > 100
    fastest_t = max(one["frequency_t"] for one in find_in_ledger(night.folder)["orbits"])
    assert fastest_t == pytest.approx(1133.0, rel=0.01)
