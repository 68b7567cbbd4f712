"""The magnet: a supply that ramps linearly, a coil, a persistent switch, and the quench.

Currents are kept as the field that they make in the coil, B = k I, so that one number serves both.
"""

import math
from dataclasses import dataclass

_ROUNDING = 1e-9


@dataclass(frozen=True, slots=True)
class CoilParameters:
    """A superconducting coil with its supply.

    Attributes
    ----------
    coil_constant_t_per_a, inductance_h, lead_resistance_ohm : float
        B = k I; V = L dI/dt + R I at the supply's terminals.
    field_max_t : float
        Largest field of the supply, either sign.
    rate_resolution_t_per_s : float
        The supply floors a rate to a multiple of this.
    default_rate_t_per_s : float
        Rate at power on and after a reset.
    charge_voltage_max_v : float
        Largest inductive voltage L dI/dt; the supply slows a ramp that would need more.
    switch_present : bool
        False: no persistent switch, the coil always follows the leads.
    switch_warm_s, switch_cool_s : float
        Lag of the persistent switch behind its heater.
    switch_mismatch_t : float
        A switch that opens on a larger difference between leads and coil quenches the coil.
    field_lag_s : float
        First-order lag of the field at the sample behind the coil's current.
    voltage_noise_v, field_noise_t : float
        Standard deviation of each measured value.
    ramp_quench : tuple of (up_to_t, rate_t_per_s)
        The coil's true limits, by rising field: a faster ramp at that field quenches it, and so
        does any ramp beyond the last entry. Empty: no ramp quenches it.
    quench_decay_s : float
        Time constant of the current's collapse, L over the normal zone's resistance.
    quench_voltage_share : float
        Share of the normal zone's resistive voltage that appears at the terminals.
    """

    coil_constant_t_per_a: float = 0.12
    inductance_h: float = 12.0
    lead_resistance_ohm: float = 1e-3
    field_max_t: float = 12.0
    rate_resolution_t_per_s: float = 1e-6
    default_rate_t_per_s: float = 1e-3
    charge_voltage_max_v: float = 5.0
    switch_present: bool = True
    switch_warm_s: float = 30.0
    switch_cool_s: float = 60.0
    switch_mismatch_t: float = 5e-3
    field_lag_s: float = 0.0
    voltage_noise_v: float = 1e-4
    field_noise_t: float = 1e-6
    ramp_quench: tuple[tuple[float, float], ...] = ()
    quench_decay_s: float = 3.0
    quench_voltage_share: float = 0.05


class Coil:
    """State of supply, leads, switch and coil; between its events everything is closed form.

    The owner calls `horizon_s`, advances by no more than that, and calls `settle` at each event.
    """

    def __init__(self, parameters: CoilParameters) -> None:
        p = parameters
        self.parameters = p
        self.target_t = 0.0
        self.rate_t_per_s = p.default_rate_t_per_s
        self.ramping = False
        self.heater = False
        self.warm = not p.switch_present
        self.quenched = False
        self.lead_t = 0.0
        self.coil_t = 0.0
        self.sample_t = 0.0
        self.persistent_t = 0.0
        self._switch_in_s = math.inf
        self._rate_max = p.charge_voltage_max_v * p.coil_constant_t_per_a / p.inductance_h

    # -- orders of the supply ------------------------------------------------------------

    def set_heater(self, on: bool) -> None:
        """Heat the persistent switch or let it cool; the switch follows with its lag."""
        p = self.parameters
        self.heater = on
        if on == self.warm:
            self._switch_in_s = math.inf
        elif math.isinf(self._switch_in_s):
            self._switch_in_s = p.switch_warm_s if on else p.switch_cool_s

    def reset(self) -> None:
        """Supply's reset: hold, heater off, default rate, target at zero.

        The quench latch is cleared too, once the current has collapsed.
        """
        self.ramping = False
        self.target_t = 0.0
        self.rate_t_per_s = self.parameters.default_rate_t_per_s
        if self.parameters.switch_present:
            self.set_heater(False)
        if self.quenched and not self.collapsing:
            self.quenched = False
            self.lead_t = self.coil_t = 0.0

    def quench(self) -> None:
        """The coil goes normal now: heater off, no ramp, current left to collapse."""
        self.quenched = True
        self.ramping = False
        self.heater = False
        self._switch_in_s = math.inf
        self.warm = True

    # -- what can be seen ------------------------------------------------------------------

    @property
    def collapsing(self) -> bool:
        """A quench is under way, and more than a millitesla is left."""
        return self.quenched and abs(self.lead_t) + abs(self.coil_t) > 1e-3

    @property
    def lead_velocity_t_per_s(self) -> float:
        """Signed rate of the leads, as field."""
        if self.quenched:
            return -self.lead_t / self.parameters.quench_decay_s
        if not self.ramping or self.lead_t == self.target_t:
            return 0.0
        rate = self.rate_t_per_s
        if self.warm and rate > self._rate_max:
            rate = self._rate_max
        return rate if self.target_t > self.lead_t else -rate

    @property
    def coil_velocity_t_per_s(self) -> float:
        """Signed rate of the coil's field."""
        if self.quenched:
            return -self.coil_t / self.parameters.quench_decay_s
        return self.lead_velocity_t_per_s if self.warm else 0.0

    @property
    def voltage_v(self) -> float:
        """Terminal voltage L dI/dt + R I; during a quench the normal zone's share is added."""
        p = self.parameters
        current_a = self.lead_t / p.coil_constant_t_per_a
        volts = p.lead_resistance_ohm * current_a
        if self.quenched:
            coil_a = self.coil_t / p.coil_constant_t_per_a
            return volts + p.quench_voltage_share * p.inductance_h / p.quench_decay_s * coil_a
        return volts + p.inductance_h * self.coil_velocity_t_per_s / p.coil_constant_t_per_a

    @property
    def energy_j(self) -> float:
        """L I^2 / 2 of the coil."""
        p = self.parameters
        return 0.5 * p.inductance_h * (self.coil_t / p.coil_constant_t_per_a) ** 2

    # -- time ----------------------------------------------------------------------------

    def horizon_s(self) -> float:
        """Time to the next event: target reached, switch turns, a quench zone begins."""
        if self.quenched:
            busy = abs(self.coil_t) + abs(self.lead_t) > 1e-9
            return self.parameters.quench_decay_s / 10.0 if busy else math.inf
        horizon = self._switch_in_s
        velocity = self.lead_velocity_t_per_s
        if velocity:
            horizon = min(horizon, (self.target_t - self.lead_t) / velocity)
            if self.warm and self.parameters.ramp_quench:
                horizon = min(horizon, self._to_next_zone_s(velocity))
        return horizon

    def _to_next_zone_s(self, velocity: float) -> float:
        here = self.coil_t if velocity > 0 else -self.coil_t
        edges = [edge for edge, _ in self.parameters.ramp_quench]
        ahead = [s for s in (*(-e for e in edges), 0.0, *edges) if s > here + _ROUNDING]
        return (min(ahead) - here) / abs(velocity) if ahead else math.inf

    def _too_fast(self, velocity: float) -> bool:
        outward = self.coil_t * velocity >= 0
        field = abs(self.coil_t) + (_ROUNDING if outward else -_ROUNDING) * 10
        for up_to_t, rate in self.parameters.ramp_quench:
            if field <= up_to_t:
                return abs(velocity) > rate * (1 + _ROUNDING)
        return bool(self.parameters.ramp_quench)

    def settle(self) -> bool:
        """Take the events that are due now; True if the coil quenches here."""
        p = self.parameters
        if self.quenched:
            return False
        if self._switch_in_s <= 0.0:
            self._switch_in_s = math.inf
            self.warm = self.heater
            if not self.warm:
                self.persistent_t = self.coil_t
            elif abs(self.lead_t - self.coil_t) > p.switch_mismatch_t:
                return True
            else:
                self.coil_t = self.lead_t
        velocity = self.coil_velocity_t_per_s
        return velocity != 0.0 and self._too_fast(velocity)

    def sample_path_t(self, duration_s: float, points: int) -> list[float]:
        """Field at the sample at `points` equal steps of the coming time, its start included."""
        p = self.parameters
        velocity = self.coil_velocity_t_per_s
        step_s = duration_s / points
        if self.quenched:
            velocity = self.coil_t * math.expm1(-duration_s / p.quench_decay_s) / duration_s
        if p.field_lag_s <= 0.0:
            first, rise = self.sample_t, velocity * step_s
            return [first + rise * i for i in range(points + 1)]
        steady_t = self.coil_t - velocity * p.field_lag_s
        offset = self.sample_t - steady_t
        decay = math.exp(-step_s / p.field_lag_s)
        return [steady_t + velocity * step_s * i + offset * decay**i for i in range(points + 1)]

    def advance(self, duration_s: float) -> None:
        """Move by a time not beyond `horizon_s`."""
        p = self.parameters
        if self.quenched:
            before = self.coil_t
            decay = math.exp(-duration_s / p.quench_decay_s)
            self.lead_t *= decay
            self.coil_t *= decay
            # Straight line between the ends; the steps are a tenth of the collapse's time.
            self._lag(duration_s, (self.coil_t - before) / duration_s, self.coil_t)
            return
        velocity = self.lead_velocity_t_per_s
        if velocity:
            left = (self.target_t - self.lead_t) / velocity
            if duration_s >= left * (1 - 1e-12):
                self.lead_t = self.target_t
            else:
                self.lead_t += velocity * duration_s
            if self.warm:
                self.coil_t = self.lead_t
        self._lag(duration_s, velocity if self.warm else 0.0, self.coil_t)
        self._switch_in_s = max(0.0, self._switch_in_s - duration_s)

    def _lag(self, duration_s: float, velocity: float, end_t: float) -> None:
        lag = self.parameters.field_lag_s
        if lag <= 0.0:
            self.sample_t = end_t
            return
        start_t = end_t - velocity * duration_s
        offset = self.sample_t - start_t + velocity * lag
        self.sample_t = end_t - velocity * lag + offset * math.exp(-duration_s / lag)
