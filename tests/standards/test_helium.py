"""Helium figures of physics.md: CoolProp's properties and OSHA's line."""

import pytest

from orchestrator.physics import helium, magnet


def test_energy_of_a_litre() -> None:
    """2564 J per litre: CoolProp (Helium, 101325 Pa), 124.67 kg/m^3 times 20.56 kJ/kg."""
    assert pytest.approx(2564, rel=5e-4) == helium.EVAPORATION_J_PER_LITRE
    assert helium.boiled_litres(2564.0) == pytest.approx(1.0, rel=5e-4)


def test_gas_of_a_litre() -> None:
    """749.6 volumes at 293.15 K, and close to the ideal gas law with 4.0026 g/mol."""
    assert helium.gas_m3(1.0) == pytest.approx(0.7496)
    ideal = 124.67e-3 / 4.002602e-3 * 8.314462618 * 293.15 / 101325
    assert helium.gas_m3(1.0) == pytest.approx(ideal, rel=2e-3)


def test_quench_of_a_laboratory_magnet() -> None:
    """10 H at 100 A hold 50 kJ: 19.5 litres, 14.6 m^3; hand arithmetic."""
    litres = helium.boiled_litres(magnet.stored_energy_j(10.0, 100.0))
    assert litres == pytest.approx(19.5, abs=0.05)
    assert helium.gas_m3(litres) == pytest.approx(14.62, abs=0.05)


def test_oxygen_line_is_reached_when_gas_is_seven_percent_of_the_room() -> None:
    """0.209 / 1.0718 = 0.195, the line of OSHA 29 CFR 1910.146."""
    line = helium.OXYGEN_DEFICIENT_FRACTION
    assert line == 0.195
    assert helium.oxygen_fraction(100.0, 100 * (0.209 / 0.195 - 1)) == pytest.approx(line)
    assert helium.oxygen_fraction(100.0, 0.0) == 0.209


def test_helium_refuses_what_has_no_meaning() -> None:
    """Negative energy, a room without volume."""
    with pytest.raises(ValueError, match=r"energy: -1\.0 J, allowed: 0 J and above"):
        helium.boiled_litres(-1.0)
    with pytest.raises(ValueError, match=r"room of 0\.0 m\^3"):
        helium.oxygen_fraction(0.0, 1.0)
