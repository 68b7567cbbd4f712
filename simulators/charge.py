"""The cold end of a one-shot stage: it takes a stated heat, is then spent, and is recharged.

As a pot of condensed liquid that is pumped until it is empty, or a salt that has warmed up. While
it is spent or being renewed the base is at a stated higher temperature; it changes at once.
Simplification: the charge is a heat in joules, whatever the temperature at which it is taken.
"""

from simulators.stage_parameters import StageParameters


class Charge:
    """Heat that the cold end can still take; without end if none is stated."""

    def __init__(self, parameters: StageParameters) -> None:
        self._p = parameters
        self._cold_k = parameters.cold_k
        self._recharged_in_s = 0.0
        self.left_j = parameters.charge_j

    @property
    def limited(self) -> bool:
        """Whether the stage is of the one-shot kind."""
        return self._p.charge_j > 0.0

    @property
    def recharging(self) -> bool:
        """Whether the charge is being renewed."""
        return self._recharged_in_s > 0.0

    @property
    def spent(self) -> bool:
        """Whether the base is not held cold: nothing is left, as while the charge is renewed."""
        return self.limited and self.left_j <= 0.0

    @property
    def base_k(self) -> float:
        """Temperature of the cold end."""
        return self._p.spent_base_k if self.spent else self._cold_k

    def recharge(self) -> None:
        """Begin to renew the charge; what is left of it is given up."""
        self.left_j = 0.0
        self._recharged_in_s = self._p.recharge_s

    def take(self, heat_j: float, duration_s: float) -> None:
        """Take the heat that has come from the stage in a time, and the leak's; renew in time.

        Heat that flows back into the stage gives nothing back.
        """
        if not self.limited:
            return
        if self.recharging:
            self._recharged_in_s -= duration_s
            if self._recharged_in_s <= 1e-9:
                self._recharged_in_s = 0.0
                self.left_j = self._p.charge_j
        else:
            self.left_j -= max(0.0, heat_j) + self._p.charge_leak_w * duration_s
            self.left_j = max(0.0, self.left_j)
