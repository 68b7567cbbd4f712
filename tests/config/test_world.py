"""A world file is read into SI, and only what it says is handed to the simulator."""

from pathlib import Path

import pytest

from orchestrator.cli.composition import load_simulated, truth_of
from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig
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


GAS = """[world]
name = "gas"
[sample]
resistance = "40 ohm"
[sample.gas]
density = "8e11 /cm^2"
mass = 0.067
dingle = "3 K"
"""


def test_a_gas_stands_in_place_of_orbits(tmp_path: Path) -> None:
    file = tmp_path / "gas.toml"
    file.write_text(GAS, encoding="utf-8")
    sample = load_world(file)[0].sample
    assert sample.gas is not None
    assert sample.gas.density_m2 == pytest.approx(8e15)
    # F = n h/(2 e), SI 2019.
    (truth,) = truth_of(load_world(file)[0])
    assert truth["frequency_t"] == pytest.approx(8e15 * 6.62607015e-34 / (2 * 1.602176634e-19))


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('"40 ohm"', '"40 ohm"\nhall_density = "8e15 /m^2"', r"sample\.hall_density.*not go with"),
        ("[sample.gas]", "[sample.gases]", r"sample\.gases.*not a key"),
        ('density = "8e11 /cm^2"', "", r"sample\.gas\.density: is missing"),
    ],
)
def test_a_gas_that_is_not_one_is_refused(tmp_path: Path, old: str, new: str, words: str) -> None:
    file = tmp_path / "gas.toml"
    assert old in GAS
    file.write_text(GAS.replace(old, new), encoding="utf-8")
    with pytest.raises(ConfigError, match=words):
        load_world(file)


def test_a_coil_that_contradicts_itself_is_refused_with_the_file(tmp_path: Path) -> None:
    deep = tmp_path / "deep.toml"
    text = SHIPPED.read_text(encoding="utf-8")
    deep.write_text(
        text.replace("[coil]\n", '[coil]\nremanence = "0.3 T"\nreversal = "0.4 T"\n'),
        encoding="utf-8",
    )
    rig, _ = load_rig(SHIPPED.parents[1] / "rigs" / "demonstration.toml")
    with pytest.raises(ConfigError, match=r"deep\.toml.*reversal_t of the coil is 0\.4 T"):
        load_simulated(deep, rig)
