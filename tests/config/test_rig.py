"""A rig file is read into SI; what is wrong is told with file, line, key, value and range."""

import re
from pathlib import Path

import pytest

from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig

SHIPPED = Path(__file__).parents[2] / "sequences" / "rigs" / "demonstration.toml"


def test_the_shipped_rig_is_read_into_si() -> None:
    rig, document = load_rig(SHIPPED)
    assert rig.magnet.field_max_t == pytest.approx(12.0)
    assert rig.magnet.ramp_ceiling[2].rate_t_per_s == pytest.approx(0.002)
    assert rig.stage.temperature_min_k == pytest.approx(0.35)
    assert [one.name for one in rig.lock_ins] == ["rxx", "rxy"]
    assert rig.gauges[0].least_percent == pytest.approx(25.0)
    assert document.where("magnet", "field_max").endswith("line 17 (magnet.field_max)")


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('field_max = "12 T"', 'field_max = "12 K"', r'line 17: magnet\.field_max = "12 K": .*T'),
        ('field_max = "12 T"', 'field_max = "nan T"', "finite"),
        ('field_max = "12 T"', 'field_max = "inf T"', "finite"),
        ('field_max = "12 T"', 'field_max = "60 T"', r"allowed: above 0 T to 45 T"),
        ('field_max = "12 T"', 'field_max = "14 T"', r"last zone must reach field_max .*14 T"),
        ('field_max = "12 T"', "", r"magnet\.field_max: is missing"),
        ('field_max = "12 T"', 'field_most = "12 T"', r"magnet\.field_m"),
        ('charge_voltage_max = "2 V"', "", r"magnet\.charge_voltage_max: is missing"),
        ('{ to = "9 T"', '{ to = "5 T"', r"line 27: magnet\.ramp_ceiling\[2\]\.to = 5 T"),
        ('name = "rxy"', 'name = "rxx"', r'lockin\[2\]\.name = "rxx": stands twice'),
        ('name = "helium"', 'name = "stage"', r'gauge\[1\]\.name = "stage": stands twice'),
        ('temperature_trip = "30 K"', 'temperature_trip = "10 K"', r"above 20 K"),
        ('measures = "hall"', 'measures = "both"', r"lockin\[2\]\.measures"),
        ('stale_after = "10 s"', 'stale_after = "1 s"', r"sampling\.stale_after = 1 s"),
        ("filter_poles = 4", "filter_poles = 4.5", r"lockin\[1\]\.filter_poles = 4\.5"),
    ],
)
def test_one_message_names_what_is_wrong(tmp_path: Path, old: str, new: str, words: str) -> None:
    broken = tmp_path / "broken.toml"
    text = SHIPPED.read_text(encoding="utf-8")
    assert old in text
    broken.write_text(text.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(ConfigError) as caught:
        load_rig(broken)
    assert re.search(words, str(caught.value)), str(caught.value)
    assert str(broken) in str(caught.value)
    assert "\n" not in str(caught.value)
