"""The magnet in depth: each effect against its closed form, and the energy against itself.

Circuit laws: Kirchhoff; L dI/dt and L I^2/2: Wilson, Superconducting Magnets (1983). Helium: 2564 J
a litre and 0.7496 m3 of gas a litre, CoolProp at 101325 Pa.
"""

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from simulators.helium import LATENT_J_PER_LITRE
from simulators.magnet_panel import MagnetPanel
from simulators.world import World, WorldParameters
from tests.simulators.rigs import Clock, quiet, sweep, with_coil

K = 0.12  # T/A
L = 12.0  # H


def alone() -> WorldParameters:
    """A rig without lock-ins: the magnet and its bath are what is looked at."""
    return replace(quiet(), lock_ins=())


def make(**coil: Any) -> tuple[World, Clock, MagnetPanel]:
    clock = Clock()
    world = World(with_coil(alone(), **coil), clock)
    return world, clock, MagnetPanel(world)


def asked(panel: MagnetPanel, line: str) -> list[float]:
    return [float(v) for v in str(panel.execute(line)).replace(",", ";").split(";")]


# -- the supply ------------------------------------------------------------------------------------


@pytest.mark.parametrize("sign", [1, -1])
def test_the_supply_keeps_to_its_own_table_both_ways(sign: int) -> None:
    world, clock, panel = make(supply_rates=((2.0, 0.02), (4.0, 0.01)), charge_voltage_max_v=50.0)
    sweep(world, 5.0 * sign, 1.0)
    way_s = 2.0 / 0.02 + 2.0 / 0.01 + 1.0 / 0.01
    clock.time_s = way_s - 0.1
    assert abs(world.field_t) == pytest.approx(5.0 - 0.001)
    clock.time_s = way_s + 0.1
    assert world.field_t == 5.0 * sign
    began_s = clock.time_s
    sweep(world, 0.0, 1.0)
    clock.time_s = began_s + 1.0 / 0.01 + 2.0 / 0.01
    assert abs(world.field_t) == pytest.approx(2.0)
    clock.time_s = began_s + way_s + 0.1
    assert world.field_t == 0.0
    assert asked(panel, "SOUR:FIEL:RATE:TABL?") == [2.0, 0.02, 4.0, 0.01]


def test_a_slewing_supply_takes_its_time_at_both_ends_and_arrives() -> None:
    """Trapezoid: way / rate + rate / slew."""
    world, clock, panel = make(slew_t_per_s2=2e-3, charge_voltage_max_v=50.0)
    sweep(world, 1.0, 0.02)
    clock.time_s = 5.0
    assert world.field_t == pytest.approx(0.5 * 2e-3 * 25)  # still speeding up
    clock.time_s = 20.0
    assert world.field_t == pytest.approx(0.02 * 10 / 2 + 0.02 * 10)
    assert asked(panel, "MEAS:VOLT?")[0] == pytest.approx(
        L * 0.02 / K + 1e-3 * world.field_t / K, rel=1e-6
    )
    clock.time_s = 1.0 / 0.02 + 0.02 / 2e-3 - 1.0
    assert 1.0 - world.field_t == pytest.approx(0.5 * 2e-3, rel=1e-6)  # a second of braking left
    clock.time_s += 1.01
    assert world.field_t == 1.0
    assert panel.execute("STAT:OPER:COND?") == "0"


def test_a_hold_while_slewing_brakes_first() -> None:
    world, clock, panel = make(slew_t_per_s2=2e-3, charge_voltage_max_v=50.0)
    sweep(world, 5.0, 0.02)
    clock.time_s = 30.0
    before_t = world.field_t
    panel.execute("SOUR:FIEL:RAMP:STAT 0")
    assert panel.execute("STAT:OPER:COND?") == "8"
    clock.time_s = 60.0
    assert world.field_t - before_t == pytest.approx(0.02**2 / (2 * 2e-3), rel=1e-6)
    assert panel.execute("STAT:OPER:COND?") == "0"


ORDERS = st.lists(
    st.tuples(
        st.sampled_from(["target", "rate", "ramp", "hold"]),
        st.floats(-5, 5).map(lambda value: round(value, 4)),
        st.floats(0.1, 50.0),
    ),
    max_size=6,
)


@settings(max_examples=40, deadline=None)
@given(ORDERS, st.sampled_from([0.0, 1e-3, 1e-2]))
def test_whatever_it_is_told_the_supply_stays_on_its_way_and_below_its_rate(
    orders: list[tuple[str, float, float]], slew: float
) -> None:
    world, clock, _ = make(
        slew_t_per_s2=slew, supply_rates=((1.0, 0.03), (9.0, 0.02)), charge_voltage_max_v=50.0
    )
    coil = world.coil
    for order, value, wait_s in orders:
        if order == "target":
            coil.target_t = value
        elif order == "rate":
            coil.rate_t_per_s = abs(value) / 100 + 1e-3
        else:
            coil.ramping = order == "ramp"
        for _ in range(4):
            before_t, before_s = world.field_t, clock.time_s
            clock.time_s += wait_s / 4
            assert abs(world.field_t - before_t) <= 0.0300001 * (clock.time_s - before_s)
            assert abs(world.field_t) <= 5.0 + (0.03**2 / (2 * slew) if slew else 0.0) + 1e-9
    coil.ramping, coil.rate_t_per_s = True, 0.02
    clock.time_s += 2000.0
    assert world.field_t == coil.target_t


# -- the switch and the joints -------------------------------------------------------------------


def test_a_persistent_field_decays_by_its_joints_and_what_it_loses_warms_the_bath() -> None:
    world, clock, panel = make(
        switch_present=True, joint_resistance_ohm=1e-6, charge_voltage_max_v=50.0
    )
    panel.execute("OUTP:SWIT:HEAT 1")
    clock.time_s = 40.0
    sweep(world, 6.0, 0.05)
    clock.time_s = 200.0
    panel.execute("OUTP:SWIT:HEAT 0")
    clock.time_s = 300.0
    world.advance()
    kept_t, energy_j, boiled_l = world.field_t, world.coil.energy_j, world.helium_boiled_l
    clock.time_s += 12 * 3600
    assert world.field_t == pytest.approx(kept_t * math.exp(-1e-6 * 12 * 3600 / L), rel=1e-12)
    lost_j = energy_j - world.coil.energy_j
    assert lost_j > 50
    assert world.helium_boiled_l - boiled_l == pytest.approx(lost_j / LATENT_J_PER_LITRE, rel=1e-6)


def with_switch(mismatch_t: float) -> tuple[World, Clock, MagnetPanel]:
    """A persistent coil at 3 T whose leads differ by a little; the heater has just come on."""
    world, clock, panel = make(
        switch_present=True, switch_resistance_ohm=24.0, switch_mismatch_t=0.02
    )
    panel.execute("OUTP:SWIT:HEAT 1")
    clock.time_s = 40.0
    sweep(world, 3.0, 0.03)
    clock.time_s = 200.0
    panel.execute("OUTP:SWIT:HEAT 0")
    clock.time_s = 300.0
    sweep(world, 3.0 + mismatch_t, 0.03)
    clock.time_s = 400.0
    panel.execute("OUTP:SWIT:HEAT 1")
    clock.time_s = 430.0
    return world, clock, panel


def test_a_small_mismatch_relaxes_through_the_warm_switch_with_a_step_of_voltage() -> None:
    """L dI/dt = R (I_leads - I_coil): the difference decays with L/R, here 0.5 s."""
    world, clock, panel = with_switch(0.01)
    assert asked(panel, "MEAS:VOLT?")[0] - 1e-3 * 3.01 / K == pytest.approx(24.0 * 0.01 / K)
    before_j = world.coil.account.switch_j
    clock.time_s += 0.5
    assert 3.01 - world.field_t == pytest.approx(0.01 / math.e, rel=1e-6)
    clock.time_s += 20
    assert world.field_t == pytest.approx(3.01, rel=1e-9)
    lost_j = world.coil.account.switch_j - before_j
    assert lost_j == pytest.approx(0.5 * L * (0.01 / K) ** 2, rel=1e-3)


def test_a_large_mismatch_quenches() -> None:
    world, clock, panel = with_switch(0.03)
    assert panel.execute("STAT:QUES:COND?") == "512"
    clock.time_s += 100
    assert abs(world.field_t) < 1e-6


def test_behind_a_warm_switch_the_coil_lags_a_ramp_by_l_over_r() -> None:
    world, clock, panel = make(switch_resistance_ohm=24.0)
    sweep(world, 3.0, 0.03)
    clock.time_s = 60.0
    assert 0.03 * 60 - world.field_t == pytest.approx(0.03 * L / 24.0, rel=1e-9)
    volts = L * 0.03 / K + 1e-3 * 0.03 * 60 / K
    assert asked(panel, "MEAS:VOLT?")[0] == pytest.approx(volts, rel=1e-9)


# -- shielding -------------------------------------------------------------------------------------


def test_shielding_lags_a_rising_field_leads_a_falling_one_and_is_left_at_zero() -> None:
    world, clock, _ = make(remanence_t=4e-3, reversal_t=0.4)

    def go(target_t: float) -> float:
        sweep(world, target_t, 0.05)
        clock.time_s += 500
        return world.field_t - world.coil.coil_t

    assert go(0.1) == pytest.approx(-2e-3)  # half turned: 0.1 T of the 0.2 T from nothing to full
    assert go(3.0) == pytest.approx(-4e-3)
    assert go(2.9) == pytest.approx(-2e-3)  # a small step back unwinds what it can
    assert go(3.0) == pytest.approx(-4e-3)
    assert go(2.0) == pytest.approx(4e-3)
    assert go(0.0) == pytest.approx(4e-3)
    assert world.field_t == pytest.approx(4e-3)  # the remanence
    sweep(world, 2.0, 0.05)
    clock.time_s += 100
    world.quench()
    clock.time_s += 100
    assert world.field_t == pytest.approx(0.0, abs=1e-6)


# -- quenches -------------------------------------------------------------------------------------


WARMING = {
    "heat_capacity_j_per_k4": 0.02,
    "recovery_w": 50.0,
    "sharing_k": 9.0,
    "sharing_t": 20.0,
}


def at_field(field_t: float, **coil: Any) -> tuple[World, Clock, MagnetPanel]:
    world, clock, panel = make(charge_voltage_max_v=50.0, **coil)
    sweep(world, field_t, 0.05)
    clock.time_s = 1000.0
    world.advance()
    return world, clock, panel


def test_a_quench_warms_the_coil_and_the_bath_takes_it_all_in_the_time_that_it_needs() -> None:
    world, clock, panel = at_field(9.0, **WARMING)
    energy_j = world.coil.energy_j
    boiled_l = world.helium_boiled_l
    assert energy_j == pytest.approx(0.5 * L * (9.0 / K) ** 2)
    world.quench()
    clock.time_s += 60.0
    given_j = (world.helium_boiled_l - boiled_l) * LATENT_J_PER_LITRE
    assert world.coil.heat.heat_j + given_j == pytest.approx(energy_j, rel=1e-3)
    hottest_k = (4 * world.coil.heat.heat_j / 0.02 + 4.22**4) ** 0.25
    assert asked(panel, "MEAS:COIL:TEMP?")[0] == pytest.approx(hottest_k, rel=1e-6)
    assert 40 < hottest_k < world.coil.heat.hot_spot_k < 120
    clock.time_s = 1000.0 + energy_j / 50.0 + 30.0
    assert asked(panel, "MEAS:COIL:TEMP?")[0] == pytest.approx(4.22)
    gone_l = world.helium_boiled_l - boiled_l
    assert gone_l * LATENT_J_PER_LITRE == pytest.approx(energy_j, rel=0.01)
    assert world.helium.gas_m3 == pytest.approx(0.7496 * world.helium_boiled_l)


def test_a_coil_that_is_still_warm_quenches_when_it_is_charged_and_a_cold_one_does_not() -> None:
    world, clock, panel = at_field(9.0, **WARMING)
    world.quench()
    clock.time_s += 100.0
    panel.execute("*RST;*CLS;:SOUR:FIEL:RATE 0.01;TARG 1;RAMP:STAT 1")
    clock.time_s += 1.0
    assert panel.execute("STAT:QUES:COND?") == "512"
    clock.time_s += 0.5 * L * (9.0 / K) ** 2 / 50.0
    panel.execute("*RST;*CLS;:SOUR:FIEL:RATE 0.01;TARG 1;RAMP:STAT 1")
    clock.time_s += 200.0
    assert panel.execute("STAT:QUES:COND?") == "0"
    assert world.field_t == 1.0


def test_a_bare_top_warms_the_coil_until_it_shares_current() -> None:
    """Half bare: bare_w/2 comes in, recovery_w/2 goes out; their sum makes c (T^4 - T_b^4)/4."""
    clock = Clock()
    warming = WARMING | {"heat_capacity_j_per_k4": 2.0, "recovery_w": 1.0}
    p = with_coil(alone(), charge_voltage_max_v=50.0, covered_percent=30.0, bare_w=2.0, **warming)
    world = World(replace(p, helium=replace(p.helium, level_percent=15.0)), clock)
    sweep(world, 9.0, 0.05)
    sharing_k = 9.0 * (1 - 9.0 / 20.0)
    needed_s = 2.0 / 4 * (sharing_k**4 - 4.22**4) / (0.5 * 2.0 - 0.5 * 1.0)
    assert needed_s > 180.0
    clock.time_s = 0.97 * needed_s
    world.advance()
    assert not world.coil.quenched
    clock.time_s = 1.03 * needed_s + 20.0
    world.advance()
    assert world.coil.quenched


def test_quenches_without_a_cause_come_at_their_rate_and_never_at_zero_field() -> None:
    """Waiting times of a Poisson process: mean 1/rate, within 4 standard errors of 300 seeds."""
    waits = []
    for seed in range(300):
        clock = Clock()
        p = replace(with_coil(alone(), quench_rate_per_h=2.0, charge_voltage_max_v=50.0), seed=seed)
        world = World(p, clock)
        clock.time_s = 600.0
        world.advance()
        assert not world.coil.quenched
        sweep(world, 1.0, 0.2)
        clock.time_s += 3600
        world.advance()
        waits.append(world.coil.quenched)
    share = np.mean(waits)
    expected = 1 - math.exp(-2.0)
    assert share == pytest.approx(expected, abs=4 * math.sqrt(expected * (1 - expected) / 300))


# -- energy ---------------------------------------------------------------------------------------

DEEP: dict[str, Any] = WARMING | {
    "switch_present": True,
    "switch_resistance_ohm": 12.0,
    "joint_resistance_ohm": 1e-5,
    "lead_resistance_ohm": 2e-3,
    "slew_t_per_s2": 2e-3,
    "supply_rates": ((3.0, 0.03), (9.0, 0.02)),
    "ramp_quench": ((5.0, 0.028), (9.0, 0.019)),
    "quench_rate_per_h": 0.2,
    "switch_mismatch_t": 0.05,
    "sharing_k": 12.0,
}
LINES = st.one_of(
    st.floats(-9, 9).map(lambda value: f"SOUR:FIEL:TARG {value:.3f}"),
    st.floats(0.001, 0.05).map(lambda value: f"SOUR:FIEL:RATE {value:.4f}"),
    st.sampled_from(
        ["SOUR:FIEL:RAMP:STAT 1", "SOUR:FIEL:RAMP:STAT 0", "OUTP:SWIT:HEAT 1", "OUTP:SWIT:HEAT 0"]
    ),
    st.just("*RST"),
)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.tuples(LINES, st.floats(0.0, 400.0)), max_size=20), st.integers(0, 50))
def test_no_orders_make_or_lose_energy(orders: list[tuple[str, float]], seed: int) -> None:
    clock = Clock()
    world = World(replace(with_coil(alone(), **DEEP), seed=seed), clock)
    panel = MagnetPanel(world)
    panel.execute("OUTP:SWIT:HEAT 1")
    clock.time_s = 40.0
    panel.execute("SOUR:FIEL:TARG 4;RATE 0.02;RAMP:STAT 1")
    for line, wait_s in orders:
        clock.time_s += wait_s
        panel.execute(line)
    world.advance()
    coil, account = world.coil, world.coil.account
    taken_j = account.leads_j + account.switch_j + account.joints_j + account.quench_j
    scale_j = max(1.0, abs(account.work_j), coil.energy_j, taken_j)
    assert abs(account.work_j - coil.energy_j - taken_j) < 0.01 * scale_j
    in_bath_j = world.helium_boiled_l * LATENT_J_PER_LITRE
    from_magnet_j = account.switch_j + account.joints_j + account.quench_j - coil.heat.heat_j
    assert in_bath_j == pytest.approx(from_magnet_j, abs=0.01 * scale_j)
    assert coil.heat.heat_j >= 0
    assert coil.heat.coil_k >= 4.2


def test_the_work_is_the_integral_of_what_the_panel_shows_as_voltage_times_current() -> None:
    """Seen from outside, ten times a second, by the trapezoidal rule."""
    world, clock, panel = make(
        slew_t_per_s2=2e-3, switch_resistance_ohm=12.0, lead_resistance_ohm=2e-3
    )
    sweep(world, 2.0, 0.02)
    watts = []
    for tenth in range(1500):
        clock.time_s = tenth / 10
        volts, amperes = asked(panel, "MEAS:VOLT?;CURR?")
        watts.append(volts * amperes)
    seen_j = np.trapezoid(watts, dx=0.1)
    account = world.coil.account
    assert account.work_j == pytest.approx(seen_j, rel=1e-3)
    assert account.work_j == pytest.approx(
        world.coil.energy_j + account.leads_j + account.switch_j, rel=1e-6
    )


def test_who_looks_when_changes_next_to_nothing_with_everything_on() -> None:
    def end(every_s: float) -> tuple[float, float, float]:
        clock = Clock()
        p = with_coil(alone(), **DEEP | {"quench_rate_per_h": 0.0, "remanence_t": 3e-3})
        world = World(with_coil(p, field_lag_s=2.0), clock)
        panel = MagnetPanel(world)
        panel.execute("OUTP:SWIT:HEAT 1")
        clock.time_s = 40.0
        panel.execute("SOUR:FIEL:TARG 4;RATE 0.015;RAMP:STAT 1")
        while clock.time_s < 400.0:
            clock.time_s += every_s
            world.advance()
        return world.field_t, world.coil.energy_j, world.helium_boiled_l

    often, seldom = end(0.36), end(360.0)
    assert seldom == pytest.approx(often, rel=1e-5)


def test_a_shielding_that_turns_in_less_than_it_adds_is_refused() -> None:
    with pytest.raises(ValueError, match=r"reversal_t of the coil is 0\.005 T; allowed is more"):
        make(remanence_t=4e-3, reversal_t=5e-3)
