"""The simulated rig against textbook physics: induction, energy, damping, periodicity, helium."""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import constants, integrate

from simulators.gauge_panel import GaugePanel
from simulators.helium import LATENT_J_PER_LITRE, HeliumBath, HeliumParameters
from simulators.magnet_panel import MagnetPanel
from simulators.sample import Orbit, Sample, SampleParameters
from simulators.world import World
from tests.simulators.rigs import Clock, quiet, sweep, with_coil


def test_terminal_voltage_is_l_di_dt_plus_r_i() -> None:
    """V = L dI/dt + R I (Wilson 1983), with dI/dt taken from the currents that were read."""
    clock = Clock()
    world = World(quiet(), clock)
    panel = MagnetPanel(world)
    coil = world.coil.parameters
    sweep(world, 6.0, 0.01)
    currents, volts = [], []
    for i in range(101):
        clock.time_s = float(i)
        current, volt = str(panel.execute("MEAS:CURR?;VOLT?")).split(";")
        currents.append(float(current))
        volts.append(float(volt))
    slope = np.gradient(currents)
    wanted = coil.inductance_h * slope + coil.lead_resistance_ohm * np.array(currents)
    assert wanted[50] == pytest.approx(1.0 + 1e-3 * 0.5 / 0.12, rel=1e-6)
    assert volts[1:-1] == pytest.approx(wanted[1:-1].tolist(), rel=1e-6)


def test_energy_put_in_by_the_supply_is_the_energy_stored() -> None:
    """Integral of V I dt over a ramp = L I^2 / 2, with lossless leads."""
    clock = Clock()
    world = World(with_coil(quiet(), lead_resistance_ohm=0.0), clock)
    panel = MagnetPanel(world)
    sweep(world, 6.0, 0.02)
    powers = []
    for i in range(301):
        clock.time_s = float(i)
        current, volt = str(panel.execute("MEAS:CURR?;VOLT?")).split(";")
        powers.append(float(current) * float(volt))
    powers[-1] = 50.0 * 2.0  # the supply stops at this instant; the ramp's last power counts
    put_in = integrate.trapezoid(powers)
    assert put_in == pytest.approx(0.5 * 12.0 * 50.0**2, rel=1e-6)
    assert world.coil.energy_j == pytest.approx(put_in, rel=1e-6)


def test_quench_boils_the_stored_energy_over_the_latent_heat() -> None:
    """E / (rho L_v); CoolProp: 124.67 kg/m3, 20.56 kJ/kg at 101325 Pa. 6 T here: 15 kJ, 5.85 L."""
    clock = Clock()
    world = World(quiet(), clock)
    gauge = GaugePanel(world, "helium")
    sweep(world, 6.0, 0.02)
    clock.time_s = 400.0
    before = float(str(gauge.execute("MEAS:LEV?")))
    world.quench()
    assert world.coil.voltage_v > 1.0  # a resistive voltage appears
    clock.time_s = 405.0
    assert world.coil_current_a == pytest.approx(50.0 * math.exp(-5 / 3), rel=1e-9)
    clock.time_s = 500.0
    litres = 15000.0 / (0.12467 * 20560.0)
    assert world.helium_boiled_l == pytest.approx(litres, rel=1e-3)
    after = float(str(gauge.execute("MEAS:LEV?")))
    assert before - after == pytest.approx(100 * litres / 60.0, rel=1e-3)


def test_latent_heat_per_litre() -> None:
    """CoolProp (Helium) at 101325 Pa: 124.67 kg/m3 x 20.56 kJ/kg."""
    assert pytest.approx(0.12467 * 20560.0, rel=1e-3) == LATENT_J_PER_LITRE


def test_one_watt_boils_about_1_4_litres_an_hour() -> None:
    """3600 J / 2563 J per litre; the rule of thumb of the trade (common practice)."""
    bath = HeliumBath(HeliumParameters(static_w=1.0))
    bath.advance(3600.0, 0.0, heater=False)
    assert bath.boiled_l == pytest.approx(1.404, rel=1e-3)


def test_level_falls_by_ramping_and_by_the_switch_heater() -> None:
    bath = HeliumBath(HeliumParameters(static_w=0.0, ramp_w_s2_per_t2=2e3, switch_heater_w=0.05))
    bath.advance(1000.0, -0.01, heater=True)
    assert bath.boiled_l == pytest.approx(1000 * (0.2 + 0.05) / 2564.0, rel=1e-9)


def one_orbit(**changes: float) -> Sample:
    orbit = Orbit(200.0, mass=0.2, dingle_k=1.0, amplitude=1.0, harmonics=1)
    flat = SampleParameters(
        magnetoresistance_per_t=0.0, magnetoresistance_per_t2=0.0, orbits=(orbit,)
    )
    return Sample(replace(flat, orbits=(replace(orbit, **changes),)))  # type: ignore[arg-type]


def test_thermal_damping_is_x_over_sinh_x() -> None:
    """X = 14.6932 T/K m T / B (Shoenberg 1984): at a maximum the ratio of two temperatures."""
    sample = one_orbit(phase=0.5)
    field_t = 8.0  # 200 / 8 = 25 whole turns, so the cosine is 1
    cold, warm = (sample.longitudinal_ohm(field_t, t) - 100.0 for t in (1.0, 4.0))
    x = 14.6932 * 0.2 / field_t
    wanted = (4 * x / math.sinh(4 * x)) / (x / math.sinh(x))
    assert warm / cold == pytest.approx(wanted, rel=1e-5)


def test_dingle_damping_is_exponential_in_inverse_field() -> None:
    """exp(-2 pi^2 k T_D m / (hbar e B)) (Dingle 1952): ratio of two Dingle temperatures."""
    little, much = (one_orbit(dingle_k=t).longitudinal_ohm(8.0, 1.0) - 100.0 for t in (0.5, 2.0))
    assert much / little == pytest.approx(math.exp(-14.6932 * 0.2 * 1.5 / 8.0), rel=1e-5)


def test_spin_factor_vanishes_at_g_m_equal_to_one() -> None:
    """cos(pi g m / 2): the spin zero at g m = 1 (Shoenberg 1984)."""
    sample = one_orbit(mass=0.5, g_factor=2.0)
    assert sample.longitudinal_ohm(10.0, 0.5) == pytest.approx(100.0, abs=1e-12)


def test_maxima_are_evenly_spaced_in_inverse_field() -> None:
    """Onsager: period 1/F; with beta = 1/2 the maxima stand at whole F/B (the phase convention)."""
    sample = one_orbit(phase=0.5, mass=1e-3, dingle_k=1e-3)
    for turns in (20, 21, 22):
        centre = 200.0 / turns
        here = sample.longitudinal_ohm(centre, 0.3)
        assert here > sample.longitudinal_ohm(centre * 1.002, 0.3)
        assert here > sample.longitudinal_ohm(centre * 0.998, 0.3)


def test_resistance_is_even_and_hall_resistance_odd_in_field_and_zero_field_is_safe() -> None:
    """Onsager-Casimir symmetry of a uniform sample."""
    sample = Sample(quiet().sample)
    assert sample.longitudinal_ohm(-7.0, 1.0) == sample.longitudinal_ohm(7.0, 1.0)
    assert sample.smooth_hall_ohm(-7.0) == -sample.smooth_hall_ohm(7.0)
    assert sample.longitudinal_ohm(0.0, 0.3) == 100.0
    assert sample.longitudinal_ohm(1e-300, 0.3) == pytest.approx(100.0)


def test_clean_sample_without_dingle_damping_is_finite_at_any_field() -> None:
    sample = one_orbit(dingle_k=0.0)
    for field_t in (0.0, 1e-9, 1e-3, 0.1, 10.0):
        assert math.isfinite(sample.longitudinal_ohm(field_t, 0.3))


def test_mobility_follows_from_density_and_resistance() -> None:
    """mu = 1 / (n e R): 1e16 m^-2 and 624.15 ohm are 1 m^2/(V s)."""
    sample = SampleParameters(resistance_ohm=1 / (1e16 * constants.e), hall_density_m2=-1e16)
    assert sample.mobility_m2_per_v_s == pytest.approx(1.0)
