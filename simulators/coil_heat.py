"""The coil's temperature: what a quench leaves in it, what a bare top lets in, what the bath takes.

C = c T^3 throughout, so that the heat above the bath is c (T^4 - T_bath^4) / 4 (Debye's law, kept
beyond its range: a simplification). A warm coil gives a stated power to the bath; a bare one is
heated by a stated power and cooled less, in proportion to what is bare.
"""

from simulators.coil_parameters import CoilParameters

_BATH_K = 4.22


class CoilHeat:
    """Heat in the coil above that of the bath."""

    def __init__(self, parameters: CoilParameters) -> None:
        self._p = parameters
        self.heat_j = 0.0
        self.hot_spot_k = _BATH_K

    @property
    def coil_k(self) -> float:
        """Mean temperature of the coil."""
        return self._temperature_k(self.heat_j)

    def _temperature_k(self, heat_j: float) -> float:
        c = self._p.heat_capacity_j_per_k4
        return (4 * heat_j / c + _BATH_K**4) ** 0.25 if c and heat_j else _BATH_K

    def begin_quench(self, energy_j: float) -> None:
        """The hot spot that an energy will make in the part of the coil that is normal at first."""
        share = self._p.hot_spot_share
        self.hot_spot_k = self._temperature_k(self.heat_j + energy_j / share)

    def is_too_warm(self, field_t: float) -> bool:
        """Whether the coil shares current with its matrix at this field, and so quenches."""
        p = self._p
        return bool(p.sharing_k) and self.coil_k > p.sharing_k * (1 - abs(field_t) / p.sharing_t)

    def absorb(self, energy_j: float) -> float:
        """Take heat; returns the part that goes to the bath at once."""
        if not self._p.heat_capacity_j_per_k4:
            return energy_j
        self.heat_j += energy_j
        return 0.0

    def advance(self, duration_s: float, level_percent: float) -> tuple[float, float]:
        """Let bath and bare top act. Returns heat given to the bath and heat let in, J."""
        p = self._p
        covered = p.covered_percent
        bare = max(0.0, 1 - level_percent / covered) if covered else 0.0
        if not bare and not self.heat_j:
            return 0.0, 0.0
        let_in = p.bare_w * bare * duration_s if p.heat_capacity_j_per_k4 else 0.0
        given = min(self.heat_j + let_in, p.recovery_w * (1 - bare) * duration_s)
        self.heat_j += let_in - given
        if self.heat_j < 1e-9:
            self.heat_j = 0.0
        return given, let_in
