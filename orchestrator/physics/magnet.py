"""A superconducting magnet as its supply sees it: current, voltage, energy, allowed rates.

B = k I, V = L dI/dt + R I, E = L I^2 / 2. Source: M. N. Wilson, Superconducting Magnets (1983);
eddy heating: J. W. Ekin, Experimental Techniques for Low-Temperature Measurements (2006).
"""

import math


def current_a(field_t: float, coil_constant_t_per_a: float) -> float:
    """Current in ampere for a field, signed as the field."""
    return field_t / coil_constant_t_per_a


def stored_energy_j(inductance_h: float, current_a: float) -> float:
    """Energy in the field in joules, L I^2 / 2."""
    return 0.5 * inductance_h * current_a**2


def terminal_voltage_v(
    inductance_h: float,
    current_rate_a_per_s: float,
    lead_resistance_ohm: float = 0.0,
    current_a: float = 0.0,
) -> float:
    """Voltage at the supply's terminals, L dI/dt + R_leads I, signed."""
    return inductance_h * current_rate_a_per_s + lead_resistance_ohm * current_a


def rate_for_charge_voltage(
    voltage_v: float, inductance_h: float, coil_constant_t_per_a: float
) -> float:
    """Field rate in T/s at which the coil's inductance takes this voltage, k V / L.

    Parameters
    ----------
    voltage_v : float
        Voltage across the coil alone in volt; take the leads' R I off before.
    inductance_h : float
        Inductance in henry, above 0.
    coil_constant_t_per_a : float
        Field per current in T/A.

    Raises
    ------
    ValueError
        If the inductance is not above 0 or the voltage is negative.
    """
    if not inductance_h > 0:
        raise ValueError(f"inductance: {inductance_h!r} H, allowed: above 0 H")
    if not voltage_v >= 0:
        raise ValueError(f"charge voltage: {voltage_v!r} V, allowed: 0 V and above")
    return coil_constant_t_per_a * voltage_v / inductance_h


def eddy_heating_w(coefficient_w_s2_per_t2: float, rate_t_per_s: float) -> float:
    """Heat in watt that a changing field leaves in the stage, kappa (dB/dt)^2."""
    return coefficient_w_s2_per_t2 * rate_t_per_s**2


def rate_for_eddy_heating(coefficient_w_s2_per_t2: float, power_w: float) -> float:
    """Field rate in T/s that heats the stage by this power in watt; infinite without eddy heating.

    Raises
    ------
    ValueError
        If the power or the coefficient is negative.
    """
    if not power_w >= 0 or not coefficient_w_s2_per_t2 >= 0:
        raise ValueError(
            f"eddy heating: {power_w!r} W at {coefficient_w_s2_per_t2!r} W s^2/T^2, "
            "allowed: both 0 or above"
        )
    if coefficient_w_s2_per_t2 == 0:
        return math.inf
    return math.sqrt(power_w / coefficient_w_s2_per_t2)
