"""A sequence file is read into SI and checked against the rig's limits before anything moves."""

import re
from pathlib import Path

import pytest

from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig
from orchestrator.config.sequence import Ladder, load_sequence

ROOT = Path(__file__).parents[2] / "sequences"
RIG, RIG_DOCUMENT = load_rig(ROOT / "rigs" / "demonstration.toml")
SHIPPED = ROOT / "overnight-ladder.toml"


def test_the_shipped_ladder_is_read_into_si() -> None:
    sequence, _ = load_sequence(SHIPPED, RIG, RIG_DOCUMENT)
    (ladder,) = sequence.steps
    assert isinstance(ladder, Ladder)
    assert len(ladder.temperatures_k) == 8
    assert ladder.window_s == pytest.approx(120.0)
    assert ladder.sweep.to_t == pytest.approx(12.0)
    assert sequence.prior.orbits[1].frequency_t == pytest.approx(1250.0)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('to = "12 T"', 'to = "13 T"', r"step\[1\]\.sweep\.to = 13 T: .*magnet\.field_max.*12 T"),
        ('to = "12 T"', 'to = "-130 kG"', r"= -13 T: .*allowed: -12 T to 12 T"),
        ('"6 K"]', '"25 K"]', r"temperatures\[8\] = 25 K: .*stage\.temperature_max"),
        ('["0.4 K"', '["0.1 K"', r"temperatures\[1\] = 0\.1 K: .*stage\.temperature_min"),
        ('["0.4 K"', '["0.4 T"', r'line 18: step\[1\]\.temperatures\[1\] = "0\.4 T": .*K'),
        ('name = "sweep"', 'name = "ladder"', r'"ladder": stands twice'),
        ('kind = "ladder"', 'kind = "stairs"', r"step\[1\].*ladder"),
        ("mass = 0.17", "mass = nan", "finite"),
        ("mass = 0.17", 'mass = "0.17"', "plain number"),
        ('window = "2 min"', 'window = "2 T"', r"line 20: step\[1\]\.window ="),
        ('window = "2 min"', 'windows = "2 min"', r"line 20: step\[1\]\.windows.* not a key"),
    ],
)
def test_one_message_names_what_is_wrong(tmp_path: Path, old: str, new: str, words: str) -> None:
    broken = tmp_path / "broken.toml"
    text = SHIPPED.read_text(encoding="utf-8")
    assert old in text
    broken.write_text(text.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(ConfigError) as caught:
        load_sequence(broken, RIG, RIG_DOCUMENT)
    assert re.search(words, str(caught.value)), str(caught.value)
    assert caught.value.line is not None
