"""A two-dimensional gas as a world's sample, seen through lock-ins."""

from dataclasses import replace

import numpy as np
import pytest

from simulators.gas_sample import gas_of
from simulators.landau import GasParameters
from simulators.world import World, WorldParameters
from tests.simulators.rigs import Clock, quiet, sweep

R_K_OHM = 25812.80745  # h/e^2, exact in the SI of 2019
GAS = GasParameters(4.0e15, 0.067, 2.0, 30.0, field_max_t=9.0, coldest_k=0.5, hottest_k=5.0)
SAMPLE = gas_of(GAS)


def world(clock: Clock) -> World:
    p: WorldParameters = replace(quiet(), sample=SAMPLE)
    lock_ins = tuple(replace(one, full_scale_v=0.05) for one in p.lock_ins)
    return World(replace(p, lock_ins=lock_ins, stage=replace(p.stage, start_k=0.5)), clock)


def amperes(one: World, name: str) -> float:
    p = one.lock_ins[name].parameters
    return p.amplitude_v / p.series_resistance_ohm


def test_a_hall_plateau_is_seen_at_r_k_over_nu_and_nothing_along() -> None:
    clock = Clock()
    one = world(clock)
    sweep(one, GAS.frequency_t / 2, 0.05)  # two levels of spin up and down filled: nu = 4
    clock.time_s = 600.0
    one.advance()
    across = one.lock_ins["xy"].clean_x_v / amperes(one, "xy")
    along = one.lock_ins["xx"].clean_x_v / amperes(one, "xx")
    assert across == pytest.approx(R_K_OHM / 4, rel=1e-3)
    assert along < 0.02 * GAS.resistance_ohm


@pytest.mark.parametrize("name", ["xx", "xy"])
def test_looking_often_or_seldom_gives_the_same_sweep(name: str) -> None:
    """Once a second against ten times: to 1e-4 of the largest signal."""

    def run(steps: int) -> np.ndarray[tuple[int], np.dtype[np.float64]]:
        clock = Clock()
        one = world(clock)
        sweep(one, 2.0, 0.05)
        clock.time_s = 100.0
        sweep(one, 5.0, 0.02)
        shown = []
        for second in range(150):
            for part in range(steps):
                clock.time_s = 100.0 + second + (part + 1) / steps
                one.advance()
            shown.append(one.lock_ins[name].clean_x_v)
        return np.array(shown)

    often, seldom = run(10), run(1)
    assert np.max(np.abs(often - seldom)) < 1e-4 * np.max(np.abs(often))
