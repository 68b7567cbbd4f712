"""The magnet's voltage, energy and rates."""

import math

import pytest

from orchestrator.physics import magnet


def test_work_of_the_terminal_voltage_is_the_stored_energy() -> None:
    """Charging at a constant rate: the integral of V I dt equals L I^2 / 2."""
    inductance, rate, top = 13.0, 0.05, 90.0
    steps = 20_000
    dt = top / rate / steps
    work = sum(
        magnet.terminal_voltage_v(inductance, rate) * rate * dt * (i + 0.5) * dt
        for i in range(steps)
    )
    assert magnet.stored_energy_j(inductance, top) == pytest.approx(work, rel=1e-9)


def test_rate_for_charge_voltage_gives_that_voltage_back() -> None:
    """Rate in field, over the coil constant, times the inductance."""
    rate = magnet.rate_for_charge_voltage(2.5, 13.0, 0.12)
    assert magnet.terminal_voltage_v(13.0, rate / 0.12) == pytest.approx(2.5)
    assert magnet.terminal_voltage_v(13.0, -rate / 0.12, 1e-3, 50.0) == pytest.approx(-2.45)
    assert magnet.current_a(-6.0, 0.12) == pytest.approx(-50.0)


def test_rates_refuse_what_has_no_meaning() -> None:
    """No inductance, negative power."""
    with pytest.raises(ValueError, match=r"inductance: 0\.0 H, allowed: above 0 H"):
        magnet.rate_for_charge_voltage(1.0, 0.0, 0.1)
    with pytest.raises(ValueError, match="charge voltage: -1"):
        magnet.rate_for_charge_voltage(-1.0, 10.0, 0.1)
    with pytest.raises(ValueError, match="eddy heating"):
        magnet.rate_for_eddy_heating(1.0, -1.0)


def test_rate_for_eddy_heating_heats_by_that_power() -> None:
    """And is unlimited for a stage without eddy currents."""
    rate = magnet.rate_for_eddy_heating(40.0, 1e-3)
    assert magnet.eddy_heating_w(40.0, -rate) == pytest.approx(1e-3)
    assert magnet.rate_for_eddy_heating(0.0, 1e-3) == math.inf
