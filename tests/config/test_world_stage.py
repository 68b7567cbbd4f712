"""The stage's keys of a world file, each read into SI and each refused with one clear error."""

from pathlib import Path

import pytest

from orchestrator.cli.composition import load_simulated, shipped, world_parameters
from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig
from orchestrator.config.world import load_world
from simulators.stage_parameters import StageParameters

SHIPPED = Path(__file__).parents[2] / "sequences" / "worlds" / "demonstration.toml"

KEYS = [
    ('heat_capacity = "0 J/K"', "heat_capacity_j_per_k", 0.0),
    ('heat_capacity_linear = "2 mJ/K^2"', "heat_capacity_linear_j_per_k2", 2e-3),
    ('heat_capacity_cubic = "30 uJ/K^4"', "heat_capacity_cubic_j_per_k4", 3e-5),
    ("cooling_exponent = 1.5", "cooling_exponent", 1.5),
    ('cooling_reference = "500 mK"', "cooling_reference_k", 0.5),
    ('heater_ranges = ["1 mW", "0.1 W"]', "heater_ranges_w", (1e-3, 0.1)),
    ("loop_on_thermometer = true", "loop_on_thermometer", True),
    ('loop_period = "50 ms"', "loop_period_s", 0.05),
    ('curie = "1 mJ*K/T^2"', "curie_j_k_per_t2", 1e-3),
    ('sample_conductance = "1 uW/K"', "sample_conductance_w_per_k", 1e-6),
    ('thermometer_error_quadratic = "1e-4 /T^2"', "thermometer_error_per_t2", 1e-4),
    (
        'thermometer_error = [{field="40 kG", relative=0.01}, {field="8 T", relative=-0.02}]',
        "thermometer_error",
        ((4.0, 0.01), (8.0, -0.02)),
    ),
    ('bath_pressure = "10 mbar"', "bath_pressure_pa", 1e3),
    ('charge = "50 J"', "charge_j", 50.0),
    ('charge_leak = "20 uW"', "charge_leak_w", 2e-5),
    ('spent_base = "1.5 K"', "spent_base_k", 1.5),
    ('recharge_time = "1 h"', "recharge_s", 3600.0),
]  # fmt: skip


def written(folder: Path, line: str) -> Path:
    path = folder / "world.toml"
    text = SHIPPED.read_text(encoding="utf-8")
    path.write_text(text.replace("[stage]\n", f"[stage]\n{line}\n", 1), encoding="utf-8")
    return path


@pytest.mark.parametrize(("line", "name", "value"), KEYS)
def test_key_is_handed_to_the_simulator_in_si(
    tmp_path: Path, line: str, name: str, value: object
) -> None:
    world, _ = load_world(written(tmp_path, line))
    given = world.stage.given()
    assert name in StageParameters.__dataclass_fields__
    assert given[name] == (value if isinstance(value, tuple | bool) else pytest.approx(value))


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ('heat_capacity = "-1 J/K"', r'stage\.heat_capacity = "-1 J/K": .*0 J/K to 1000'),
        ('heat_capacity_linear = "-1 J/K^2"', r"stage\.heat_capacity_linear .*0 J/K\^2 to 1000"),
        ('heat_capacity_cubic = "1 J/K^3"', r"stage\.heat_capacity_cubic .*J/K\^4"),
        ("cooling_exponent = 7", r"stage\.cooling_exponent = 7: .*0 to 6"),
        ('cooling_reference = "0 K"', r"stage\.cooling_reference .*above 0 K to 400"),
        ('heater_ranges = ["0 W"]', r"stage\.heater_ranges\[1\] .*above 0 W to 1000"),
        ("heater_ranges = []", r"stage\.heater_ranges"),
        ("loop_on_thermometer = 1", r"stage\.loop_on_thermometer"),
        ('loop_period = "1 ms"', r"stage\.loop_period .*0\.01 s to 10"),
        ('curie = "-1 J*K/T^2"', r"stage\.curie .*0 J\*K/T\^2 to 1000"),
        ('sample_conductance = "-1 W/K"', r"stage\.sample_conductance .*0 W/K to 1000"),
        ('thermometer_error_quadratic = "0.1 /T^2"', r"thermometer_error_quadratic .*to 0\.01"),
        (
            'thermometer_error = [{ field = "4 T", relative = -1 }]',
            r"stage\.thermometer_error\[1\]\.relative = -1: .*above -1 to 1",
        ),
        ('bath_pressure = "1 mbar"', r"stage\.bath_pressure .*115 Pa to 196000"),
        ('charge = "0 J"', r"stage\.charge .*above 0 J"),
        ('charge_leak = "-1 W"', r"stage\.charge_leak .*0 W to 1000"),
        ('spent_base = "0 K"', r"stage\.spent_base .*above 0 K"),
        ('recharge_time = "0 s"', r"stage\.recharge_time .*above 0 s"),
    ],
)
def test_key_outside_its_range_is_refused(tmp_path: Path, line: str, words: str) -> None:
    with pytest.raises(ConfigError, match=words):
        load_world(written(tmp_path, line))


def test_keys_that_contradict_each_other_are_refused_with_their_file(tmp_path: Path) -> None:
    rig, _ = load_rig(shipped("rigs/demonstration.toml"))
    path = written(tmp_path, 'charge = "1 J"\nspent_base = "0.2 K"')
    with pytest.raises(ConfigError, match=r"world\.toml.*stage: spent_base_k .* is 0\.2 K"):
        load_simulated(path, rig)


def test_deep_stage_of_a_file_reaches_the_world(tmp_path: Path) -> None:
    rig, _ = load_rig(shipped("rigs/demonstration.toml"))
    path = written(tmp_path, 'charge = "1 J"\nheat_capacity_linear = "1 mJ/K^2"')
    stage = world_parameters(rig, load_simulated(path, rig).world, 1).stage
    assert (stage.charge_j, stage.heat_capacity_linear_j_per_k2) == (1.0, pytest.approx(1e-3))
    assert not stage.constant
