"""The lock-in's keys of a world file, each read into SI and each refused with one clear error."""

from math import radians
from pathlib import Path

import pytest

from orchestrator.cli.composition import load_simulated, shipped, world_parameters
from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig
from orchestrator.config.world import load_world
from simulators.lockin_parameters import LockInParameters

SHIPPED = Path(__file__).parents[2] / "sequences" / "worlds" / "demonstration.toml"

KEYS = [
    ('noise_corner = "1.5 kHz"', "noise_corner_hz", 1500.0),
    ("johnson_noise = true", "johnson_noise", True),
    ('wiring_phase = "-12 deg"', "wiring_phase_rad", radians(-12)),
    ('coupling = "2 /GHz"', "coupling_per_hz", 2e-9),
    ("third_harmonic = 0.01", "third_harmonic", 0.01),
    ('third_harmonic_at = "20 nA"', "third_harmonic_at_a", 2e-8),
    ('mains = ["10 uV", "0 V"]', "mains_v", (1e-5, 0.0)),
    ('mains_phase = "1 rad"', "mains_phase_rad", 1.0),
    ('knock = "3 uV*s"', "knock_v_s", 3e-6),
    ('knock_step = "1 uV"', "knock_step_v", 1e-6),
    ('full_scales = ["1 mV", "10 mV"]', "full_scales_v", (1e-3, 1e-2)),
    ('input_range = "30 mV"', "input_range_v", 0.03),
]  # fmt: skip


def written(folder: Path, line: str, table: str = "") -> Path:
    path = folder / "world.toml"
    text = SHIPPED.read_text(encoding="utf-8")
    text = text.replace('name = "rxx"\n', f'name = "rxx"\n{line}\n', 1)
    path.write_text(text + table, encoding="utf-8")
    return path


@pytest.mark.parametrize(("line", "name", "value"), KEYS)
def test_key_is_handed_to_the_simulator_in_si(
    tmp_path: Path, line: str, name: str, value: object
) -> None:
    rig, _ = load_rig(shipped("rigs/demonstration.toml"))
    simulated = load_simulated(written(tmp_path, line), rig)
    lock_in = world_parameters(rig, simulated.world, 1).lock_ins[0]
    expected = value if isinstance(value, bool) else pytest.approx(value)
    assert getattr(lock_in, name) == expected
    assert getattr(LockInParameters("a"), name) != expected or name == "third_harmonic_at_a"


def test_surroundings_are_handed_to_the_simulator(tmp_path: Path) -> None:
    rig, _ = load_rig(shipped("rigs/demonstration.toml"))
    table = '\n[surroundings]\nmains_frequency = "60 Hz"\nknocks = "48 /day"\n'
    simulated = load_simulated(written(tmp_path, "", table), rig)
    surroundings = world_parameters(rig, simulated.world, 1).surroundings
    assert surroundings.mains_hz == 60.0
    assert surroundings.knocks_per_h == pytest.approx(2.0)


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ('noise_corner = "-1 Hz"', r"lockin\[1\]\.noise_corner .*0 Hz to 1e\+06"),
        ("johnson_noise = 1", r"lockin\[1\]\.johnson_noise"),
        ('wiring_phase = "400 deg"', r"lockin\[1\]\.wiring_phase .*-6\.2832 rad to 6\.2832"),
        ('coupling = "2 /Hz"', r"lockin\[1\]\.coupling .*-1 1/Hz to 1"),
        ("third_harmonic = 0.4", r"lockin\[1\]\.third_harmonic = 0\.4: .*-0\.3 to 0\.3"),
        ('third_harmonic_at = "0 A"', r"lockin\[1\]\.third_harmonic_at .*above 0 A to 1"),
        ('mains = ["-1 V"]', r"lockin\[1\]\.mains\[1\] .*0 V to 1000"),
        ("mains = []", r"lockin\[1\]\.mains"),
        ('mains_phase = "7 rad"', r"lockin\[1\]\.mains_phase .*6\.2832 rad"),
        ('knock = "-1 V*s"', r"lockin\[1\]\.knock .*0 V\*s to 1"),
        ('knock_step = "-1 V"', r"lockin\[1\]\.knock_step .*0 V to 1000"),
        ('full_scales = ["0 V"]', r"lockin\[1\]\.full_scales\[1\] .*1e-09 V to 10"),
        ('input_range = "0 V"', r"lockin\[1\]\.input_range .*above 0 V to 1000"),
    ],
)
def test_key_outside_its_range_is_refused(tmp_path: Path, line: str, words: str) -> None:
    with pytest.raises(ConfigError, match=words):
        load_world(written(tmp_path, line))


@pytest.mark.parametrize(
    ("table", "words"),
    [
        ('mains_frequency = "1 Hz"', r"surroundings\.mains_frequency .*10 Hz to 1000"),
        ('knocks = "2 /s"', r"surroundings\.knocks .*0 1/h to 3600"),
    ],
)
def test_surroundings_outside_their_range_are_refused(
    tmp_path: Path, table: str, words: str
) -> None:
    with pytest.raises(ConfigError, match=words):
        load_world(written(tmp_path, "", f"\n[surroundings]\n{table}\n"))


def test_ranges_that_do_not_rise_are_refused_with_their_file(tmp_path: Path) -> None:
    rig, _ = load_rig(shipped("rigs/demonstration.toml"))
    path = written(tmp_path, 'full_scales = ["2 mV", "1 mV"]')
    with pytest.raises(ConfigError, match=r"world\.toml.*lockin\[1\]: full_scales_v .* rising"):
        load_simulated(path, rig)
