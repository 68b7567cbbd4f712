"""What the stage's controller, thermometer and cold end do beyond the constant stage."""

import math
from dataclasses import replace

import numpy as np
import pytest

from simulators.cryostat import StageParameters
from simulators.stage_panel import StagePanel
from simulators.vapour_pressure import vapour_pa
from simulators.world import World
from tests.simulators.rigs import Clock, quiet, sweep
from tests.simulators.test_stage import settle
from tests.simulators.test_world import POLLS, run


def make(**changes: object) -> tuple[StagePanel, World, Clock]:
    clock = Clock()
    p = quiet()
    world = World(replace(p, stage=replace(p.stage, **changes)), clock)  # type: ignore[arg-type]
    return StagePanel(world), world, clock


def ask(panel: StagePanel, query: str) -> float:
    return float(str(panel.execute(query)))


def test_gains_by_hand_at_their_defaults_do_as_the_default_loop() -> None:
    """The digital loop lags by half its period of 0.1 s: 0.3 % of a step with t_r = 4 s."""
    both = []
    for by_hand in (False, True):
        panel, world, clock = make()
        settle(panel, clock, 2.0)
        if by_hand:
            panel.execute("SOUR:TEMP:LOOP:AUTO 0")
        panel.execute("SOUR:TEMP:RATE 0;SPO 2.5")
        seen = []
        for _ in range(120):
            clock.time_s += 0.25
            world.advance()
            seen.append(world.stage.stage_k)
        both.append(seen)
    difference = np.abs(np.subtract(*both)).max()
    assert 0 < difference < 0.003 * 0.5


def test_gains_are_shown_in_si_and_auto_gives_them_back() -> None:
    """2 C/t_r - G and C/t_r^2 for 0.05 J/K, 2 mW/K, 4 s."""
    panel, world, clock = make()
    query = "SOUR:TEMP:LOOP:PROP?;INT?;DER?;AUTO?"
    default = "2.300000000E-02;3.125000000E-03;0.000000000E+00;1"
    assert panel.execute(query) == default
    settle(panel, clock, 2.0)
    power_w = ask(panel, "MEAS:HEAT:POW?")
    panel.execute("SOURCE:TEMPERATURE:LOOP:PROPORTIONAL 0.1;DERIVATIVE 0.02")
    assert panel.execute(query) == "1.000000000E-01;3.125000000E-03;2.000000000E-02;0"
    assert ask(panel, "MEAS:HEAT:POW?") == pytest.approx(power_w, rel=1e-9)  # without a bump
    clock.time_s += 300.0
    assert world.sample_k == pytest.approx(2.0, abs=1e-6)
    panel.execute("SOUR:TEMP:LOOP:AUTO 1")
    assert panel.execute(query) == default
    assert ask(panel, "MEAS:HEAT:POW?") == pytest.approx(power_w, rel=1e-6)
    panel.execute("SOUR:TEMP:LOOP:INT 0.01;*RST")
    assert panel.execute(query) == default
    panel.execute("SOUR:TEMP:LOOP:INT -1")
    assert panel.execute("SYST:ERR?") == '-222,"Data out of range;-1 is outside 0 to 1e+06"'


@pytest.mark.parametrize("exponent", [0.0, 1.0])
def test_heater_keeps_to_the_chosen_range(exponent: float) -> None:
    """Asked for a power, the panel takes the smallest range that gives it."""
    panel, world, clock = make(heater_ranges_w=(1e-4, 4e-3, 0.2), cooling_exponent=exponent)
    assert panel.execute("OUTP:HEAT:RANG?;RANG:CAT?") == (
        "2.000000000E-01;1.000000000E-04,4.000000000E-03,2.000000000E-01"
    )
    settle(panel, clock, 5.0)
    assert ask(panel, "MEAS:HEAT:POW?") > 4e-3
    panel.execute("OUTPUT:HEATER:RANGE 2 MW")
    assert ask(panel, "OUTP:HEAT:RANG?") == 4e-3
    assert ask(panel, "MEAS:HEAT:POW?") == 4e-3  # falls at once
    for _ in range(100):
        clock.time_s += 5.0
        assert ask(panel, "MEAS:HEAT:POW?") == pytest.approx(4e-3, rel=1e-9)
    n = exponent + 1
    assert world.sample_k == pytest.approx((0.3**n + n * 2.0) ** (1 / n), rel=1e-4)
    panel.execute("OUTP:HEAT:RANG MAX")
    clock.time_s += 300.0
    assert world.sample_k == pytest.approx(5.0, abs=1e-4)
    panel.execute("OUTP:HEAT:RANG 0.1 MW;*RST")
    assert ask(panel, "OUTP:HEAT:RANG?") == 0.2
    panel.execute("OUTP:HEAT:RANG 0.3")
    assert panel.execute("SYST:ERR?") == '-222,"Data out of range;0.3 is outside 0 to 0.2"'


def test_heater_off_is_off_at_once_on_the_grid_too() -> None:
    panel, world, clock = make(cooling_exponent=1.0)
    settle(panel, clock, 2.0)
    clock.time_s += 0.037
    panel.execute("OUTP:HEAT:STAT 0")
    assert ask(panel, "MEAS:HEAT:POW?") == 0.0
    clock.time_s += 2000.0
    assert world.sample_k == pytest.approx(0.3, abs=1e-3)


def test_set_point_ramp_is_followed_on_the_grid_with_twice_the_response() -> None:
    """As the closed form: 2 t_r behind a steady ramp, here with C and G that grow with T."""
    panel, world, clock = make(
        heat_capacity_j_per_k=0.0, heat_capacity_linear_j_per_k2=0.02, cooling_exponent=1.0,
        response_s=4.0,
    )  # fmt: skip
    settle(panel, clock, 2.0)
    clock.time_s += 0.06
    panel.execute("SOUR:TEMP:RATE 0.01;SPO 4")
    clock.time_s += 100.0
    assert world.sample_k == pytest.approx(2.0 + 0.01 * (100.0 - 8.0 - 1.0), abs=5e-3)
    assert panel.execute("STAT:OPER:COND?") == "10"
    clock.time_s += 300.0
    assert panel.execute("STAT:OPER:COND?") == "0"


@pytest.mark.parametrize(
    ("changes", "field_t", "shown"),
    [
        ({"thermometer_error_per_t2": 4e-4}, 5.0, 1.01),
        ({"thermometer_error": ((4.0, 0.02), (8.0, 0.03))}, -6.0, 1.025),
        ({"thermometer_error": ((4.0, -0.02), (8.0, 0.03))}, 2.0, 0.99),
        ({"thermometer_error": ((4.0, 0.02),)}, 9.0, 1.02),
    ],
)
def test_thermometer_in_field_leads_the_loop_astray(
    changes: dict[str, object], field_t: float, shown: float
) -> None:
    """Shown = true x (1 + error); the loop holds what is shown."""
    panel, world, clock = make(eddy_w_s2_per_t2=0.0, **changes)
    settle(panel, clock, 2.0)
    sweep(world, field_t, 0.02)
    clock.time_s += 1000.0
    assert ask(panel, "MEAS:TEMP?") == pytest.approx(2.0, abs=1e-6)
    assert world.sample_k == pytest.approx(2.0 / shown, abs=1e-6)


def test_unheated_thermometer_shows_its_error_at_once_with_the_field() -> None:
    panel, world, clock = make(thermometer_error_per_t2=1e-3, eddy_w_s2_per_t2=0.0, start_k=0.3)
    sweep(world, 10.0, 0.01)
    for _ in range(10):
        clock.time_s += 7.77
        assert ask(panel, "MEAS:TEMP?") == pytest.approx(0.3 * (1 + 1e-3 * world.field_t**2))


def test_excitation_warms_the_sample_by_its_power_over_the_conductance() -> None:
    """Two currents of 1 uA rms in 100 ohm: 0.2 nW, 20 mK over 10 nW/K; Ohm's and Fourier's laws."""
    _, world, clock = make(sample_conductance_w_per_k=1e-8, start_k=0.3, eddy_w_s2_per_t2=0.0)
    clock.time_s = 60.0
    assert world.sample_k - world.stage.stage_k == pytest.approx(0.02, rel=1e-6)
    for lock_in in world.lock_ins.values():
        lock_in.amplitude_v = 2.0
    clock.time_s = 120.0
    assert world.sample_k - world.stage.stage_k == pytest.approx(0.08, rel=1e-6)
    sweep(world, 10.0, 1.0)
    clock.time_s = 420.0
    assert world.sample_k - world.stage.stage_k == pytest.approx(0.08 * 1.2, rel=1e-6)


@pytest.mark.parametrize("after_s", [0.02, 0.05, 0.1, 0.33, 1.0, 2.71])
def test_what_is_seen_between_two_looks_of_the_loop_is_exact(after_s: float) -> None:
    """1 - exp(-t / lag) from the loop's first look at 0.1 s, first-order lag of 1 s (textbook)."""
    _, world, clock = make(
        sample_conductance_w_per_k=1e-8, start_k=0.3, heat_capacity_j_per_k=1.0, response_s=4.0
    )
    clock.time_s = 0.1 + after_s
    wanted = 0.02 * (1 - math.exp(-after_s))
    assert world.sample_k - 0.3 == pytest.approx(wanted, rel=1e-6)


def test_one_shot_holds_its_base_until_its_charge_is_used_up_and_is_recharged() -> None:
    """Holding time = charge / (leak + load): 2 J at 1 mW + 1 mW is 1000 s."""
    panel, world, clock = make(
        start_k=0.8, base_k=0.3, charge_j=2.0, charge_leak_w=1e-3, spent_base_k=1.4,
        recharge_s=600.0,
    )  # fmt: skip
    panel.execute("OUTP:HEAT:STAT 1;:SOUR:TEMP:SPO 0.8")
    clock.time_s = 500.0
    used = 2.0 - ask(panel, "MEAS:CHAR?")
    assert used == pytest.approx(500 * 2e-3, rel=0.03)  # the stage's first fall is heat, too
    held_s = 2.0 / used * 500.0
    clock.time_s = held_s - 15.0
    assert world.sample_k == pytest.approx(0.8, abs=1e-3)
    assert panel.execute("STAT:QUES:COND?") == "0"
    clock.time_s = held_s + 15.0
    assert panel.execute("STAT:QUES:COND?;:MEAS:CHAR?") == "16;0.000000000E+00"
    clock.time_s = held_s + 300.0
    assert world.sample_k == pytest.approx(1.4, abs=1e-4)
    panel.execute("SOUR:TEMP:SPO 0.3;:SOURCE:CHARGE:RECHARGE")
    clock.time_s += 599.0
    assert panel.execute("STAT:QUES:COND?") == "16"
    assert int(str(panel.execute("STAT:OPER:COND?"))) & (1 << 9)
    panel.execute("SOUR:CHAR:RECH")
    assert panel.execute("SYST:ERR?") == '-221,"Settings conflict;it is being recharged"'
    clock.time_s += 1.2
    assert panel.execute("STAT:QUES:COND?") == "0"
    assert ask(panel, "MEAS:CHAR?") == pytest.approx(2.0, abs=5e-3)
    clock.time_s += 300.0
    assert world.sample_k == pytest.approx(0.3, abs=1e-4)


def test_ordinary_stage_has_no_charge() -> None:
    panel, _, _ = make()
    panel.execute("SOUR:CHAR:RECH")
    assert panel.execute("MEAS:CHAR?") is None
    assert panel.execute("SYST:ERR:COUN?;NEXT?") == (
        '2;-241,"Hardware missing;the cold end has no charge"'
    )


def test_pumped_bath_gives_the_base_and_the_lowest_set_point() -> None:
    """ITS-90; the stage still moves in closed form, with the time constant C / G."""
    panel, world, clock = make(bath_pressure_pa=vapour_pa(1.6), start_k=2.6)
    clock.time_s = 25.0
    world.advance()
    assert (world.stage.stage_k - 1.6) == pytest.approx(math.exp(-1.0), rel=1e-6)
    assert ask(panel, "SOUR:TEMP:SPO? MIN") == pytest.approx(1.6, abs=1e-6)


DEEP = {
    "heat_capacity_linear_j_per_k2": 0.01,
    "heat_capacity_cubic_j_per_k4": 1e-4,
    "cooling_exponent": 1.0,
    "heater_ranges_w": (0.01, 0.2),
    "loop_on_thermometer": True,
    "curie_j_k_per_t2": 1e-3,
    "thermometer_error_per_t2": 1e-4,
    "sample_conductance_w_per_k": 1e-7,
    "charge_j": 1e4,
    "charge_leak_w": 1e-4,
}


@pytest.mark.parametrize("how", ["uneven", "at the end"])
def test_polling_does_not_change_a_deep_stage(how: str) -> None:
    p = quiet()
    p = replace(p, stage=replace(p.stage, **DEEP))  # type: ignore[arg-type]
    one, other = run(p, POLLS["once a second"]), run(p, POLLS[how])
    assert other.field_t == pytest.approx(one.field_t, rel=1e-10)
    assert other.sample_k == pytest.approx(one.sample_k, rel=1e-9)
    assert other.stage.thermometer_k == pytest.approx(one.stage.thermometer_k, rel=1e-9)
    assert other.stage.heater_w == pytest.approx(one.stage.heater_w, rel=1e-7)
    assert other.stage.charge.left_j == pytest.approx(one.stage.charge.left_j, rel=1e-9)
    for name in ("xx", "xy"):
        difference = other.lock_ins[name].clean_x_v - one.lock_ins[name].clean_x_v
        assert abs(difference) < 1e-5 * 1e-3


def test_polling_changes_a_quench_of_a_deep_stage_by_little() -> None:
    """The rate of a collapsing field is a mean over each look, so this one is not exact."""
    p = quiet()
    p = replace(p, stage=replace(p.stage, **DEEP))  # type: ignore[arg-type]
    ends = []
    for polls in (1.0, 0.37, 20.0):
        clock = Clock()
        world = World(p, clock)
        sweep(world, 8.0, 0.1)
        clock.time_s = 100.0
        world.quench()
        while clock.time_s < 140.0:
            clock.time_s = min(140.0, clock.time_s + polls)
            world.advance()
        ends.append(world.sample_k)
    assert ends[0] > 10.0
    assert ends == pytest.approx([ends[0]] * 3, rel=1e-3)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"heat_capacity_j_per_k": 0.0}, "heat capacity of the stage is 0 J/K .* one above 0"),
        ({"heat_capacity_cubic_j_per_k4": -1.0}, "allowed is no negative part"),
        (
            {"cooling_exponent": 1.0, "response_s": 0.2},
            r"response_s of the stage is 0\.2 s; allowed is 0\.4 s or more",
        ),
        ({"heater_ranges_w": (0.1, 0.01)}, r"heater_ranges_w .* is \(0\.1, 0\.01\); .*rising"),
        ({"heater_ranges_w": (0.1, 0.3)}, r"goes to 0\.3 W; allowed is up to .* 0\.2 W"),
        ({"thermometer_error": ((2.0, 0.1), (1.0, 0.1))}, r"at \(2\.0, 1\.0\) T; must rise"),
        ({"thermometer_error": ((2.0, -1.5),)}, r"is -1\.5; allowed is above -1"),
        (
            {"thermometer_error": ((2.0, 0.1),), "thermometer_error_per_t2": 1e-4},
            r"as a table and per T\^2",
        ),
        ({"thermometer_error_per_t2": -1e-3}, r"is -0\.001; allowed is -4e-4 or more"),
        ({"charge_j": 1.0, "spent_base_k": 0.3}, r"spent_base_k .* 0\.3 K; allowed is above"),
        ({"bath_pressure_pa": 50.0}, r"50 Pa; allowed is 114\.7"),
    ],
)
def test_impossible_stage_is_refused_when_made(changes: dict[str, object], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        StageParameters(**changes)  # type: ignore[arg-type]
