"""The magnet supply, its switch and its quench, seen from the panel and from the world's truth."""

from dataclasses import replace

import pytest

from simulators.magnet_panel import MagnetPanel
from simulators.world import World, WorldParameters
from tests.simulators.rigs import Clock, quiet, sweep, with_coil


def make(parameters: WorldParameters) -> tuple[MagnetPanel, World, Clock]:
    clock = Clock()
    world = World(parameters, clock)
    return MagnetPanel(world), world, clock


def asked(panel: MagnetPanel, line: str) -> list[float]:
    return [float(v) for v in str(panel.execute(line)).split(";")]


def test_ramp_is_linear_and_stops_exactly_at_the_target() -> None:
    panel, world, clock = make(quiet())
    panel.execute("SOUR:FIEL:TARG 1;RATE 0.01")
    clock.time_s = 10.0
    assert asked(panel, "MEAS:FIEL?") == [0.0]  # power on: hold
    panel.execute("SOUR:FIEL:RAMP:STAT 1")
    clock.time_s = 35.0
    assert asked(panel, "MEAS:FIEL?") == pytest.approx([0.25])
    panel.execute("SOUR:FIEL:RAMP:STAT 0")
    clock.time_s = 50.0
    assert asked(panel, "MEAS:FIEL?;CURR?") == pytest.approx([0.25, 0.25 / 0.12])
    panel.execute("SOUR:FIEL:RAMP:STAT 1")
    clock.time_s = 500.0
    assert asked(panel, "MEAS:FIEL?;:STAT:OPER:COND?") == [1.0, 0.0]
    assert world.field_t == 1.0


def test_supply_floors_the_rate_to_its_resolution() -> None:
    panel, _, _ = make(with_coil(quiet(), rate_resolution_t_per_s=1e-4))
    panel.execute("SOUR:FIEL:RATE 0.00129")
    assert asked(panel, "SOUR:FIEL:RATE?") == pytest.approx([0.0012])
    panel.execute("SOUR:FIEL:RATE 0.0012")
    assert asked(panel, "SOUR:FIEL:RATE?") == pytest.approx([0.0012])


def test_charge_voltage_slows_the_ramp() -> None:
    """L dI/dt at 12 H and 0.12 T/A: 1 V allows 0.01 T/s."""
    panel, _, clock = make(with_coil(quiet(), charge_voltage_max_v=1.0, lead_resistance_ohm=0.0))
    panel.execute("SOUR:FIEL:TARG 5;RATE 1;RAMP:STAT 1")
    clock.time_s = 100.0
    assert asked(panel, "MEAS:FIEL?;VOLT?") == pytest.approx([1.0, 1.0])


def test_too_fast_a_ramp_quenches_where_the_table_says() -> None:
    table = ((3.0, 0.02), (6.0, 0.01))
    panel, world, clock = make(with_coil(quiet(), ramp_quench=table))
    panel.execute("SOUR:FIEL:TARG 5;RATE 0.015;RAMP:STAT 1")
    clock.time_s = 3.0 / 0.015 - 0.01
    assert panel.execute("STAT:QUES:COND?") == "0"
    clock.time_s = 3.0 / 0.015 + 0.01
    assert panel.execute("STAT:QUES:COND?;:SOUR:FIEL:RAMP:STAT?") == "512;0"
    assert world.field_t == pytest.approx(3.0, rel=0.01)


@pytest.mark.parametrize("sign", [1, -1])
def test_a_ramp_just_inside_the_table_does_not_quench(sign: int) -> None:
    table = ((3.0, 0.02), (6.0, 0.01))
    panel, world, clock = make(with_coil(quiet(), ramp_quench=table))
    panel.execute(f"SOUR:FIEL:TARG {3 * sign};RATE 0.02;RAMP:STAT 1")
    clock.time_s = 200.0
    panel.execute(f"SOUR:FIEL:RATE 0.01;TARG {6 * sign}")
    clock.time_s = 600.0
    panel.execute(f"SOUR:FIEL:TARG {3 * sign}")
    clock.time_s = 1000.0
    panel.execute("SOUR:FIEL:TARG 0;RATE 0.02")
    clock.time_s = 1600.0
    assert panel.execute("STAT:QUES:COND?") == "0"
    assert world.field_t == 0.0


def test_ramping_down_too_fast_from_high_field_quenches_at_once() -> None:
    table = ((3.0, 0.02), (6.0, 0.01))
    panel, _, clock = make(with_coil(quiet(), ramp_quench=table))
    panel.execute("SOUR:FIEL:TARG 5;RATE 0.01;RAMP:STAT 1")
    clock.time_s = 1000.0
    panel.execute("SOUR:FIEL:TARG 0;RATE 0.015")
    assert panel.execute("STAT:QUES:COND?") == "512"


def test_after_a_quench_orders_are_refused_until_reset() -> None:
    panel, world, clock = make(quiet())
    sweep(world, 4.0, 0.04)
    clock.time_s = 100.0
    world.quench()
    panel.execute("*CLS;:SOUR:FIEL:TARG 1;RATE 0.1;RAMP:STAT 1")
    assert panel.execute("SYST:ERR:COUN?;NEXT?") == '3;-221,"Settings conflict;quench detected"'
    clock.time_s = 101.0
    panel.execute("*RST")
    assert panel.execute("STAT:QUES:COND?") == "512"  # the current has not gone yet
    clock.time_s = 200.0
    assert panel.execute("STAT:QUES:COND?;:SOUR:FIEL:TARG?;RAMP:STAT?") == ("512;0.000000000E+00;0")
    panel.execute("*RST;*CLS;:SOUR:FIEL:TARG 1")
    assert panel.execute("STAT:QUES:COND?;:SYST:ERR?") == '0;0,"No error"'


def test_persistent_switch_keeps_the_field_while_the_leads_go_down() -> None:
    panel, world, clock = make(with_coil(quiet(), switch_present=True))
    panel.execute("SOUR:FIEL:TARG 2;RATE 0.02;RAMP:STAT 1")
    clock.time_s = 100.0
    assert world.field_t == 0.0  # switch cold: the leads alone moved
    assert asked(panel, "MEAS:FIEL?;VOLT?") == pytest.approx([2.0, 1e-3 * 2 / 0.12])
    panel.execute("SOUR:FIEL:TARG 0")
    clock.time_s = 200.0
    panel.execute("OUTP:SWIT:HEAT 1")
    clock.time_s = 229.0
    assert panel.execute("STAT:OPER:COND?") == "0"
    clock.time_s = 231.0
    assert panel.execute("STAT:OPER:COND?") == "256"
    panel.execute("SOUR:FIEL:TARG 2")
    clock.time_s = 331.0
    assert world.field_t == 2.0
    panel.execute("OUTP:SWIT:HEAT 0")
    clock.time_s = 395.0
    panel.execute("SOUR:FIEL:TARG 0")
    clock.time_s = 600.0
    assert asked(panel, "MEAS:FIEL?;:SOUR:FIEL:PERS?;:OUTP:SWIT:HEAT?") == [0.0, 2.0, 0.0]
    assert world.field_t == 2.0
    assert world.coil_current_a == pytest.approx(2.0 / 0.12)


def test_opening_the_switch_on_unequal_currents_quenches() -> None:
    panel, world, clock = make(with_coil(quiet(), switch_present=True))
    panel.execute("SOUR:FIEL:TARG 0.1;RATE 0.02;RAMP:STAT 1")
    clock.time_s = 10.0
    panel.execute("OUTP:SWIT:HEAT 1")
    clock.time_s = 39.0
    assert panel.execute("STAT:QUES:COND?") == "0"
    clock.time_s = 41.0
    assert panel.execute("STAT:QUES:COND?;:OUTP:SWIT:HEAT?") == "512;0"
    assert world.coil.quenched


def test_switch_heater_of_a_coil_without_switch_is_refused() -> None:
    panel, _, _ = make(quiet())
    panel.execute("OUTP:SWIT:HEAT 1")
    assert panel.execute("SYST:ERR?") == '-241,"Hardware missing;no persistent switch"'


def test_field_at_the_sample_lags_by_its_time_constant_times_the_rate() -> None:
    _, world, clock = make(with_coil(quiet(), field_lag_s=5.0))
    sweep(world, 10.0, 0.01)
    clock.time_s = 100.0
    field_t = world.field_t
    assert world.coil.lead_t - field_t == pytest.approx(0.05, rel=1e-6)
    clock.time_s = 1200.0
    assert world.field_t == pytest.approx(10.0, abs=1e-9)


def test_field_noise_has_its_standard_deviation_on_the_reading_alone() -> None:
    panel, world, _ = make(with_coil(quiet(), field_noise_t=1e-3))
    values = [asked(panel, "MEAS:FIEL?")[0] for _ in range(4000)]
    spread = (sum(v * v for v in values) / len(values)) ** 0.5
    # Standard error of a standard deviation from 4000 draws: 1.1 %; 5 of those allowed.
    assert spread == pytest.approx(1e-3, rel=0.056)
    assert world.field_t == 0.0


def test_an_empty_bath_quenches_a_coil_with_current() -> None:
    p = quiet()
    p = replace(p, helium=replace(p.helium, level_percent=0.01, static_w=1.0))
    panel, world, clock = make(p)
    sweep(world, 1.0, 0.1)
    clock.time_s = 10.0
    assert panel.execute("STAT:QUES:COND?") == "0"
    clock.time_s = 60.0  # 6 ml at 1 W last 15 s
    assert panel.execute("STAT:QUES:COND?") == "512"
    assert world.helium.percent == 0.0
