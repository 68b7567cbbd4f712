"""The sample stage and its controller."""

import math
from dataclasses import replace

import pytest

from simulators.cryostat import StageParameters
from simulators.stage_panel import StagePanel
from simulators.world import World
from tests.simulators.rigs import Clock, quiet, sweep


def make(**changes: float) -> tuple[StagePanel, World, Clock]:
    clock = Clock()
    p = quiet()
    world = World(replace(p, stage=replace(p.stage, **changes)), clock)
    return StagePanel(world), world, clock


def settle(panel: StagePanel, clock: Clock, temperature_k: float) -> None:
    panel.execute(f"OUTP:HEAT:STAT 1;:SOUR:TEMP:SPO {temperature_k}")
    clock.time_s += 400.0


def test_step_of_the_set_point_follows_a_critically_damped_second_order_lag() -> None:
    """1 - (1 + t/t_r) exp(-t/t_r): step response of 1/(1 + s t_r)^2, textbook."""
    panel, world, clock = make(response_s=4.0)
    settle(panel, clock, 2.0)
    world.advance()
    start_s = clock.time_s
    panel.execute("SOUR:TEMP:SPO 2.5")
    for after_s in (0.5, 2.0, 4.0, 10.0, 30.0):
        clock.time_s = start_s + after_s
        world.advance()
        u = after_s / 4.0
        wanted = 2.0 + 0.5 * (1 - (1 + u) * math.exp(-u))
        assert world.stage.stage_k == pytest.approx(wanted, abs=1e-6)


def test_set_point_ramp_is_followed_with_a_lag_of_twice_the_response() -> None:
    panel, world, clock = make(response_s=4.0)
    settle(panel, clock, 2.0)
    world.advance()
    start_s = clock.time_s
    panel.execute("SOUR:TEMP:RATE 0.01;SPO 4")
    clock.time_s = start_s + 100.0
    assert panel.execute("SOUR:TEMP:SPO?;:STAT:OPER:COND?") == "4.000000000E+00;10"
    assert world.stage.stage_k == pytest.approx(2.0 + 0.01 * (100.0 - 8.0), abs=1e-6)
    clock.time_s = start_s + 400.0
    assert panel.execute("STAT:OPER:COND?") == "0"
    assert float(str(panel.execute("MEAS:TEMP?"))) == pytest.approx(4.0, abs=1e-6)


def test_heater_off_falls_to_base_with_its_own_time_constant() -> None:
    """Newton's cooling: exp(-t G / C)."""
    _, world, clock = make(start_k=1.3)
    clock.time_s = 25.0
    world.advance()
    assert world.stage.stage_k == pytest.approx(0.3 + math.exp(-1.0), rel=1e-9)


def test_steady_heater_power_balances_the_cooling() -> None:
    panel, _, clock = make()
    settle(panel, clock, 5.3)
    assert float(str(panel.execute("MEAS:HEAT:POW?"))) == pytest.approx(0.002 * 5.0, rel=1e-6)


def test_heater_limit_makes_a_large_step_slower_and_never_overshoots_much() -> None:
    panel, world, clock = make(heater_max_w=0.05)
    settle(panel, clock, 1.0)
    world.advance()
    start_s, highest = clock.time_s, 0.0
    panel.execute("SOUR:TEMP:SPO 15")
    for i in range(1, 400):
        clock.time_s = start_s + i
        power = float(str(panel.execute("MEAS:HEAT:POW?")))
        assert -1e-9 <= power <= 0.05 * (1 + 1e-9)
        highest = max(highest, world.stage.stage_k)
    assert world.stage.stage_k == pytest.approx(15.0, abs=1e-3)
    assert highest < 15.3


def test_eddy_heating_warms_the_unheated_stage_by_its_power_over_the_cooling() -> None:
    """P = kappa (dB/dt)^2 (Ekin 2006): 20 W s2/T2 at 5 mT/s is 0.5 mW, 0.25 K at 2 mW/K."""
    _, world, clock = make(start_k=0.3)
    sweep(world, 10.0, 0.005)
    clock.time_s = 500.0
    assert world.sample_k == pytest.approx(0.55, abs=1e-6)


def test_heated_stage_takes_eddy_heating_back_from_the_heater() -> None:
    panel, world, clock = make()
    settle(panel, clock, 2.0)
    sweep(world, 10.0, 0.005)
    clock.time_s += 300.0
    power = float(str(panel.execute("MEAS:HEAT:POW?")))
    assert power == pytest.approx(0.002 * 1.7 - 0.0005, rel=1e-5)
    assert world.sample_k == pytest.approx(2.0, abs=1e-6)


def test_set_point_outside_the_range_is_refused() -> None:
    panel, _, _ = make()
    panel.execute("SOUR:TEMP:SPO 31;SPO 0.1")
    assert panel.execute("SYST:ERR:COUN?;NEXT?") == (
        '2;-222,"Data out of range;31 is outside 0.3 to 30"'
    )


def test_impossible_response_is_refused_when_made() -> None:
    with pytest.raises(ValueError, match=r"response_s of the stage is 60.0 s; allowed is 0 to 50"):
        StageParameters(response_s=60.0)
