"""What the simulated magnet is made of: supply, leads, switch, coil, and the coil's own limits."""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class CoilParameters:
    """A superconducting coil with its supply. Zero, or an empty table, leaves an effect out.

    Attributes
    ----------
    coil_constant_t_per_a, inductance_h : float
        B = k I; the inductive voltage is L dI/dt.
    lead_resistance_ohm : float
        Of the leads to the supply; warm, and outside the bath.
    joint_resistance_ohm : float
        Of the joints in the coil's own circuit: decay in persistent mode, heat into the bath.
    field_max_t : float
        Largest field of the supply, either sign.
    rate_resolution_t_per_s : float
        The supply floors a rate to a multiple of this.
    default_rate_t_per_s : float
        Rate at power on and after a reset.
    supply_rates : tuple of (up_to_t, rate_t_per_s)
        The supply's own table, by rising field of its output: it ramps no faster there; the last
        entry holds beyond its end too.
    slew_t_per_s2 : float
        How fast the supply changes its rate.
    charge_voltage_max_v : float
        Largest inductive voltage L dI/dt; the supply slows a ramp that would need more.
    switch_present : bool
        False: no persistent switch, the coil always follows the leads.
    switch_warm_s, switch_cool_s : float
        Lag of the persistent switch behind its heater.
    switch_resistance_ohm : float
        Of the warm switch, across the coil; 0 stands for one that carries nothing.
    switch_mismatch_t : float
        A switch that opens on a larger difference between leads and coil quenches the coil.
    field_lag_s : float
        First-order lag of the field at the sample behind the coil's.
    remanence_t : float
        Field left by the winding's shielding currents after a ramp down to zero.
    reversal_t : float
        Change of the field over which the shielding turns from one sign to the other.
    voltage_noise_v, field_noise_t : float
        Standard deviation of each measured value.
    ramp_quench : tuple of (up_to_t, rate_t_per_s)
        The coil's true limits, by rising field: a faster ramp at that field quenches it, and so
        does any ramp beyond the last entry. Empty: no ramp quenches it.
    quench_rate_per_h : float
        Quenches without a cause, on average in an hour at field.
    quench_decay_s : float
        Time constant of the current's collapse, L over the normal zone's resistance.
    quench_voltage_share : float
        Share of the normal zone's resistive voltage that appears at the terminals.
    heat_capacity_j_per_k4 : float
        c of the whole coil in C = c T^3; 0: a quench boils the bath at once.
    hot_spot_share : float
        Share of the coil's volume in which a quench leaves its heat at first.
    recovery_w : float
        Power at which a warm coil gives its heat to the bath that covers it.
    sharing_k, sharing_t : float
        The coil quenches above sharing_k (1 - B/sharing_t); sharing_k 0: never by temperature.
    covered_percent : float
        Helium level below which the coil's top is bare.
    bare_w : float
        Heat that reaches the coil once it is all bare.
    """

    coil_constant_t_per_a: float = 0.12
    inductance_h: float = 12.0
    lead_resistance_ohm: float = 1e-3
    joint_resistance_ohm: float = 0.0
    field_max_t: float = 12.0
    rate_resolution_t_per_s: float = 1e-6
    default_rate_t_per_s: float = 1e-3
    supply_rates: tuple[tuple[float, float], ...] = ()
    slew_t_per_s2: float = 0.0
    charge_voltage_max_v: float = 5.0
    switch_present: bool = True
    switch_warm_s: float = 30.0
    switch_cool_s: float = 60.0
    switch_resistance_ohm: float = 0.0
    switch_mismatch_t: float = 5e-3
    field_lag_s: float = 0.0
    remanence_t: float = 0.0
    reversal_t: float = 0.5
    voltage_noise_v: float = 1e-4
    field_noise_t: float = 1e-6
    ramp_quench: tuple[tuple[float, float], ...] = ()
    quench_rate_per_h: float = 0.0
    quench_decay_s: float = 3.0
    quench_voltage_share: float = 0.05
    heat_capacity_j_per_k4: float = 0.0
    hot_spot_share: float = 0.2
    recovery_w: float = 100.0
    sharing_k: float = 0.0
    sharing_t: float = 24.0
    covered_percent: float = 0.0
    bare_w: float = 1.0

    def __post_init__(self) -> None:
        if self.remanence_t and self.reversal_t <= 2 * self.remanence_t:
            raise ValueError(
                f"reversal_t of the coil is {self.reversal_t:g} T; "
                f"allowed is more than {2 * self.remanence_t:g} T, twice its remanence"
            )
