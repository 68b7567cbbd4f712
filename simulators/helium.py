"""The helium bath: what boils it, and how far its level has fallen."""

from dataclasses import dataclass

LATENT_J_PER_LITRE = 2564.0
"""Heat that boils one litre at 101325 Pa: 124.67 kg/m3 x 20.56 kJ/kg (CoolProp, Helium)."""

GAS_M3_PER_LITRE = 0.7496
"""Liquid at 4.2238 K to gas at 293.15 K, both at 101325 Pa (CoolProp, Helium)."""


@dataclass(frozen=True, slots=True)
class HeliumParameters:
    """A bath that loses liquid at rest, by ramping, by the switch heater and at a quench.

    Attributes
    ----------
    capacity_l : float
        Litres at a level of 100 %.
    level_percent : float
        Level at the start.
    static_w : float
        Heat leak at rest; 1 W boils about 1.4 litres an hour.
    ramp_w_s2_per_t2 : float
        Losses in the winding and its former: power = this x (dB/dt)^2.
    switch_heater_w : float
        Power of the persistent switch's heater, all of it into the bath.
    """

    capacity_l: float = 60.0
    level_percent: float = 85.0
    static_w: float = 0.1
    ramp_w_s2_per_t2: float = 2.0e3
    switch_heater_w: float = 0.05


class HeliumBath:
    """State of the bath."""

    def __init__(self, parameters: HeliumParameters) -> None:
        self.parameters = parameters
        self.boiled_l = 0.0
        self._start_l = parameters.capacity_l * parameters.level_percent / 100.0

    @property
    def litres(self) -> float:
        """Liquid left, not below zero."""
        return max(0.0, self._start_l - self.boiled_l)

    @property
    def percent(self) -> float:
        """Level, percent of the capacity."""
        return 100.0 * self.litres / self.parameters.capacity_l

    @property
    def gas_m3(self) -> float:
        """Gas that what has boiled makes at 293.15 K and 101325 Pa."""
        return self.boiled_l * GAS_M3_PER_LITRE

    def absorb(self, energy_j: float) -> None:
        """Boil off what an energy in joules boils, as long as there is liquid."""
        self.boiled_l = min(self._start_l, self.boiled_l + energy_j / LATENT_J_PER_LITRE)

    def advance(self, duration_s: float, rate_t_per_s: float, heater: bool) -> None:
        """Let the steady losses act for a time in which the coil's rate does not change."""
        p = self.parameters
        power_w = p.static_w + p.ramp_w_s2_per_t2 * rate_t_per_s * rate_t_per_s
        if heater:
            power_w += p.switch_heater_w
        self.absorb(power_w * duration_s)
