"""A world file is read into SI, and only what it says is handed to the simulator."""

from pathlib import Path

import pytest

from orchestrator.config.document import ConfigError
from orchestrator.config.world import load_world

SHIPPED = Path(__file__).parents[2] / "sequences" / "worlds" / "demonstration.toml"


def test_the_shipped_world_is_read_into_si() -> None:
    world, _ = load_world(SHIPPED)
    assert world.sample.orbits[0].frequency_t == pytest.approx(412.6)
    assert world.sample.hall_density_m2 == pytest.approx(5.2e16)
    assert world.lock_ins[0].given() == {"name": "rxx", "noise_v_per_rthz": pytest.approx(10e-9)}
    assert world.coil.given()["ramp_quench"][0] == pytest.approx((6.0, 0.015))
    assert "inductance_h" not in world.coil.given()


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("mass = 0.192", "mass = -1", r"orbits\[1\]\.mass = -1: .*above 0"),
        ('"412.6 T"', '"412.6 K"', r"line 14: sample\.orbits\[1\]\.frequency"),
        ('base = "0.3 K"', 'bass = "0.3 K"', r"stage\.bass = .*not a key"),
        ("[coil]", '[coil]\nremanence = "2 T"', r"coil\.remanence = .*0 T to 1 T"),
        ("[coil]", '[coil]\nslew = "2 mT/s"', r"coil\.slew = .*T/s\^2"),
        ("seed = 20", "seed = -1", r"world\.seed = -1"),
        ('resistance = "100 ohm"', "", r"sample\.resistance: is missing"),
    ],
)
def test_one_message_names_what_is_wrong(tmp_path: Path, old: str, new: str, words: str) -> None:
    broken = tmp_path / "broken.toml"
    text = SHIPPED.read_text(encoding="utf-8")
    assert old in text
    broken.write_text(text.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(ConfigError, match=words):
        load_world(broken)


def test_the_coil_in_depth_is_read_into_si(tmp_path: Path) -> None:
    deep = tmp_path / "deep.toml"
    more = """[coil]
slew = "2 mT/s^2"
supply_rates = [{ to = "3 T", rate = "0.6 T/min" }]
joint_resistance = "1 nohm"
quench_rate = "0.05 /hour"
remanence = "3 mT"
reversal = "0.4 T"
heat_capacity = "30 mJ/K^4"
sharing_temperature = "9 K"
covered = "30 percent"
"""
    text = SHIPPED.read_text(encoding="utf-8").replace("[coil]\n", more)
    deep.write_text(text, encoding="utf-8")
    given = load_world(deep)[0].coil.given()
    assert given["slew_t_per_s2"] == pytest.approx(2e-3)
    assert given["supply_rates"] == ((3.0, pytest.approx(0.01)),)
    assert given["joint_resistance_ohm"] == pytest.approx(1e-9)
    assert given["quench_rate_per_h"] == pytest.approx(0.05)
    assert given["heat_capacity_j_per_k4"] == pytest.approx(0.03)
    assert given["covered_percent"] == pytest.approx(30.0)
