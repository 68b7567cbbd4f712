"""The coupled world: results do not depend on who looks when, and the seed decides the noise."""

from dataclasses import replace

import numpy as np
import pytest

from simulators.panels import panels
from simulators.world import World, WorldParameters
from tests.simulators.rigs import Clock, quiet, sweep, with_coil

POLLS = {
    "once a second": np.arange(1.0, 401.0),
    "uneven": np.cumsum(np.random.default_rng(5).uniform(0.01, 1.5, 520)),
    "at the end": np.array([]),
}


def run(parameters: WorldParameters, polls: np.ndarray[tuple[int], np.dtype[np.float64]]) -> World:
    """A heated stage, a sweep with a stop, a slower sweep; looked at when told."""
    clock = Clock()
    world = World(parameters, clock)
    orders = {
        0.0: lambda: sweep(world, 3.0, 0.03),
        5.0: lambda: (world.stage.set_setpoint(2.0), world.stage.set_heater(True)),
        150.0: lambda: sweep(world, 4.0, 0.005),
    }
    for time_s in sorted({*polls[polls < 400].tolist(), *orders, 400.0}):
        clock.time_s = time_s
        world.advance()
        if time_s in orders:
            orders[time_s]()
    return world


@pytest.mark.parametrize("how", ["uneven", "at the end"])
@pytest.mark.parametrize("lag_s", [0.0, 3.0])
def test_polling_does_not_change_the_result(how: str, lag_s: float) -> None:
    parameters = with_coil(quiet(), field_lag_s=lag_s)
    parameters = replace(
        parameters, helium=replace(parameters.helium, static_w=0.2, ramp_w_s2_per_t2=2e3)
    )
    one, other = run(parameters, POLLS["once a second"]), run(parameters, POLLS[how])
    assert other.field_t == pytest.approx(one.field_t, rel=1e-10)
    assert other.sample_k == pytest.approx(one.sample_k, rel=1e-6)
    assert other.helium_boiled_l == pytest.approx(one.helium_boiled_l, rel=1e-9)
    for name, full_scale_v in (("xx", 1e-3), ("xy", 1e-3)):
        difference = other.lock_ins[name].clean_x_v - one.lock_ins[name].clean_x_v
        assert abs(difference) < 1e-5 * full_scale_v


@pytest.mark.parametrize("how", ["uneven", "at the end"])
def test_polling_does_not_change_a_quench(how: str) -> None:
    table = ((1.5, 0.05), (9.0, 0.02))
    parameters = with_coil(quiet(), ramp_quench=table)
    one, other = run(parameters, POLLS["once a second"]), run(parameters, POLLS[how])
    assert one.coil.quenched
    assert other.coil.quenched
    assert other.helium_boiled_l == pytest.approx(one.helium_boiled_l, rel=1e-9)
    assert other.sample_k == pytest.approx(one.sample_k, rel=1e-4)


def transcript(seed: int) -> list[str | None]:
    parameters = replace(
        WorldParameters(seed=seed),
        lock_ins=tuple(replace(p, noise_v_per_rthz=1e-8) for p in quiet().lock_ins),
        gauges=quiet().gauges,
    )
    clock = Clock()
    all_panels = panels(World(parameters, clock))
    lines = []
    for i in range(300):
        clock.time_s = float(i)
        lines.append(all_panels["magnet"].execute("MEAS:FIEL?;VOLT?"))
        lines.append(all_panels["stage"].execute("MEAS:TEMP?"))
        lines.append(all_panels["xx"].execute("MEAS:XY?"))
        lines.append(all_panels["xy"].execute("MEAS:XY?"))
    return lines


def test_same_seed_same_bytes_other_seed_other_noise() -> None:
    first = transcript(1)
    assert transcript(1) == first
    pairs = list(zip(first, transcript(2), strict=True))
    assert all(a != b for i, (a, b) in enumerate(pairs) if i % 4 < 2)
    # Lock-in values are digitised, so a few meet by chance.
    assert sum(a == b for a, b in pairs) < 0.02 * len(pairs)


def test_looking_twice_at_one_instant_changes_nothing_of_the_lock_in() -> None:
    clock = Clock()
    p = quiet()
    noisy = tuple(replace(lock_in, noise_v_per_rthz=1e-8) for lock_in in p.lock_ins)
    panel = panels(World(replace(p, lock_ins=noisy), clock))["xx"]
    clock.time_s = 3.0
    assert panel.execute("MEAS:XY?") == panel.execute("MEAS:XY?")


def test_a_clock_that_does_not_move_and_a_wide_gap_are_both_taken() -> None:
    clock = Clock()
    world = World(quiet(), clock)
    sweep(world, 10.0, 0.01)
    clock.time_s = 43200.0
    assert world.field_t == 10.0
    assert world.helium_boiled_l == 0.0


def test_unknown_measurement_is_refused_when_made() -> None:
    with pytest.raises(ValueError, match="lock-in xx measures 'sideways'; allowed are"):
        replace(quiet().lock_ins[0], measures="sideways")  # type: ignore[arg-type]
