"""What a magnet's energy does to liquid helium, and what the gas does to the air of a room.

Properties of helium at 101325 Pa are CoolProp's: boiling at 4.2238 K, liquid 124.67 kg/m^3, heat of
evaporation 20.56 kJ/kg, gas 749.6 times the liquid's volume at 293.15 K. The estimates assume that
all energy boils liquid and that the gas mixes with the room's air: they are orientation, not a
safety calculation.
"""

LIQUID_DENSITY_KG_PER_M3 = 124.67
EVAPORATION_J_PER_KG = 20.56e3
GAS_TO_LIQUID_VOLUME = 749.6
BOILING_K = 4.2238

AIR_OXYGEN_FRACTION = 0.209
OXYGEN_DEFICIENT_FRACTION = 0.195
"""OSHA, 29 CFR 1910.146: deficient below 19.5 percent. Other countries and facilities differ."""

EVAPORATION_J_PER_LITRE: float = LIQUID_DENSITY_KG_PER_M3 * EVAPORATION_J_PER_KG * 1e-3


def boiled_litres(energy_j: float) -> float:
    """Litres of liquid helium that this energy in joules evaporates at normal pressure.

    Raises
    ------
    ValueError
        If the energy is negative.
    """
    if not energy_j >= 0:
        raise ValueError(f"energy: {energy_j!r} J, allowed: 0 J and above")
    return energy_j / EVAPORATION_J_PER_LITRE


def gas_m3(liquid_litres: float) -> float:
    """Gas volume in cubic metres at 293.15 K and 101325 Pa from litres of liquid helium."""
    return liquid_litres * 1e-3 * GAS_TO_LIQUID_VOLUME


def oxygen_fraction(room_m3: float, released_gas_m3: float) -> float:
    """Fraction of oxygen in a closed room after a release, well mixed: 0.209 V / (V + V_gas).

    Raises
    ------
    ValueError
        If the room has no volume or the released gas is negative.
    """
    if not room_m3 > 0 or not released_gas_m3 >= 0:
        raise ValueError(
            f"room of {room_m3!r} m^3 with {released_gas_m3!r} m^3 of gas, "
            "allowed: a room above 0 m^3, gas 0 m^3 or more"
        )
    return AIR_OXYGEN_FRACTION * room_m3 / (room_m3 + released_gas_m3)
