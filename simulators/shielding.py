"""The winding's shielding currents: a small hysteresis of the field against the current.

A stop operator (Krasnosel'skii & Pokrovskii 1989, from memory): what the shielding adds changes
against the field in proportion to its change, until it is fully turned at plus or minus the
remanence. It lags a rising field, leads a falling one, and is what is left at zero current.
"""

import math

from simulators.coil_parameters import CoilParameters


class Shielding:
    """What the shielding currents add to the field, T."""

    def __init__(self, parameters: CoilParameters) -> None:
        self._most_t = parameters.remanence_t
        self._slope = 2 * parameters.remanence_t / parameters.reversal_t
        self.added_t = 0.0

    def turned_in_s(self, velocity_t_per_s: float) -> float:
        """Time until it is fully turned at this velocity of the field."""
        if not self._most_t or not velocity_t_per_s or self._is_full(velocity_t_per_s):
            return math.inf
        left = self.added_t + math.copysign(self._most_t, velocity_t_per_s)
        return abs(left) / (self._slope * abs(velocity_t_per_s))

    def _is_full(self, change: float) -> bool:
        return -math.copysign(self.added_t, change * self.added_t) >= self._most_t * (1 - 1e-12)

    def after(self, change_t: float) -> float:
        """What it adds after the field has changed one way."""
        if not self._most_t:
            return 0.0
        return min(self._most_t, max(-self._most_t, self.added_t - self._slope * change_t))
