"""The magnet: supply, leads, persistent switch, coil, and where its energy goes.

Currents are kept as the field that they make in the coil, B = k I, so that one number serves both.
Between two events everything is closed form; the owner calls `horizon_s`, advances by no more than
that, and calls `settle` at each event.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

from simulators.coil_heat import CoilHeat
from simulators.coil_parameters import CoilParameters
from simulators.shielding import Shielding
from simulators.supply import Motion, Supply

__all__ = ["Coil", "CoilParameters"]

_ROUNDING = 1e-9
_ENERGIZED_T = 1e-3


@dataclass
class EnergyAccount:
    """Where the supply's work has gone, J; `Coil.energy_j` is what is stored.

    What the supply has done equals what is stored, and what leads, switch, joints and quenches
    have taken. `bare_j` came into a coil with a bare top from outside.
    """

    work_j: float = 0.0
    leads_j: float = 0.0
    switch_j: float = 0.0
    joints_j: float = 0.0
    quench_j: float = 0.0
    bare_j: float = 0.0

    def bath_j(self) -> tuple[float, float]:
        """Heat that switch and joints have given to the bath, and quenches to the coil."""
        return self.switch_j + self.joints_j, self.quench_j


class Coil:
    """State of the magnet.

    Parameters
    ----------
    parameters : CoilParameters
    draw : callable
        A standard normal number from the magnet's own stream, for quenches without a cause.
    """

    def __init__(self, parameters: CoilParameters, draw: Callable[[], float] = lambda: 0.0) -> None:
        p = parameters
        self.parameters = p
        self.supply = Supply(p)
        self.heat = CoilHeat(p)
        self.shielding = Shielding(p)
        self.account = EnergyAccount()
        self.heater = False
        self.warm = not p.switch_present
        self.quenched = False
        self.coil_t = 0.0
        self.sample_t = 0.0
        self.persistent_t = 0.0
        self._switch_in_s = math.inf
        self._rate_max = p.charge_voltage_max_v * p.coil_constant_t_per_a / p.inductance_h
        self._draw = draw
        self._moving: Motion | None = None  # kept until something changes it
        self._settled = False
        self._chance_in_s = self._next_chance_s()
        # The coil behind a warm switch follows the leads with this lag; its joints leak a little.
        whole_ohm = p.switch_resistance_ohm + p.joint_resistance_ohm
        self._follow_s = p.inductance_h / whole_ohm if p.switch_resistance_ohm else 0.0
        self._follow_share = p.switch_resistance_ohm / whole_ohm if self._follow_s else 1.0

    def _changed(self) -> None:
        """What was worked out of the state before no longer holds."""
        self._moving = None
        self._settled = False

    def _next_chance_s(self) -> float:
        rate_per_h = self.parameters.quench_rate_per_h
        if not rate_per_h:
            return math.inf
        # A uniform number from a normal one; waiting times of a Poisson process are exponential.
        uniform = 0.5 * math.erfc(self._draw() / math.sqrt(2))
        return -math.log(max(uniform, 1e-300)) * 3600.0 / rate_per_h

    # -- the supply, as its owner sees it ----------------------------------------------------

    @property
    def target_t(self) -> float:
        """Where the supply ramps to."""
        return self.supply.target_t

    @target_t.setter
    def target_t(self, value: float) -> None:
        self.supply.target_t = value
        self._changed()

    @property
    def rate_t_per_s(self) -> float:
        """The rate that the supply was told."""
        return self.supply.rate_t_per_s

    @rate_t_per_s.setter
    def rate_t_per_s(self, value: float) -> None:
        self.supply.rate_t_per_s = value
        self._changed()

    @property
    def ramping(self) -> bool:
        """Whether the supply ramps towards its target, or holds."""
        return self.supply.ramping

    @ramping.setter
    def ramping(self, value: bool) -> None:
        self.supply.ramping = value
        self._changed()

    @property
    def lead_t(self) -> float:
        """Output of the supply."""
        return self.supply.output_t

    # -- orders ---------------------------------------------------------------------------

    def set_heater(self, on: bool) -> None:
        """Heat the persistent switch or let it cool; the switch follows with its lag."""
        p = self.parameters
        self.heater = on
        self._changed()
        if on == self.warm:
            self._switch_in_s = math.inf
        elif math.isinf(self._switch_in_s):
            self._switch_in_s = p.switch_warm_s if on else p.switch_cool_s

    def reset(self) -> None:
        """Supply's reset: hold, heater off, default rate, target at zero.

        The quench latch is cleared too, once the current has collapsed.
        """
        self.supply.ramping = False
        self.supply.target_t = 0.0
        self.supply.rate_t_per_s = self.parameters.default_rate_t_per_s
        if self.parameters.switch_present:
            self.set_heater(False)
        if self.quenched and not self.collapsing:
            self.quenched = False
            self.supply.stop(0.0)
            self.coil_t = 0.0
        self._changed()

    def quench(self) -> None:
        """The coil goes normal now: heater off, no ramp, current left to collapse."""
        self.heat.begin_quench(self.energy_j)
        self.shielding.added_t = 0.0
        self.quenched = True
        self.supply.stop(self.lead_t)
        self.heater = False
        self._switch_in_s = math.inf
        self.warm = True
        self._changed()

    # -- what can be seen ------------------------------------------------------------------

    @property
    def collapsing(self) -> bool:
        """A quench is under way, and more than a millitesla is left."""
        return self.quenched and abs(self.lead_t) + abs(self.coil_t) > 1e-3

    def _motion(self) -> Motion:
        if self._moving is None:
            self._moving = self.supply.motion(self._rate_max if self.warm else math.inf)
        return self._moving

    @property
    def lead_velocity_t_per_s(self) -> float:
        """Signed rate of the leads, as field."""
        if self.quenched:
            return -self.lead_t / self.parameters.quench_decay_s
        motion = self._motion()
        # A supply that is about to slew away from rest is on its way.
        return motion.velocity or motion.acceleration * 1e-9

    @property
    def coil_velocity_t_per_s(self) -> float:
        """Signed rate of the coil's field."""
        if self.quenched:
            return -self.coil_t / self.parameters.quench_decay_s
        if not self.warm:
            return -self.coil_t * self._decay_per_s
        if self._follow_s:
            return (self._follow_share * self.lead_t - self.coil_t) / self._follow_s
        return self._motion().velocity

    @property
    def is_bent(self) -> bool:
        """Whether the coil's velocity is not the same throughout a step."""
        return bool(self._follow_s or self.parameters.slew_t_per_s2)

    @property
    def _decay_per_s(self) -> float:
        return self.parameters.joint_resistance_ohm / self.parameters.inductance_h

    @property
    def voltage_v(self) -> float:
        """Terminal voltage; during a quench a share of the normal zone's is in it."""
        return self._voltage_v(self.lead_t, self.coil_t, self.coil_velocity_t_per_s)

    def _voltage_v(self, lead_t: float, coil_t: float, coil_velocity: float) -> float:
        p = self.parameters
        k = p.coil_constant_t_per_a
        volts = p.lead_resistance_ohm * lead_t / k
        if self.quenched:
            return volts + p.quench_voltage_share * p.inductance_h / p.quench_decay_s * coil_t / k
        if not self.warm:
            return volts
        if self._follow_s:
            return volts + p.switch_resistance_ohm * (lead_t - coil_t) / k
        return volts + (p.inductance_h * coil_velocity + p.joint_resistance_ohm * coil_t) / k

    @property
    def energy_j(self) -> float:
        """L I^2 / 2 of the coil."""
        return self._stored_j(self.coil_t)

    def _stored_j(self, coil_t: float) -> float:
        p = self.parameters
        return 0.5 * p.inductance_h * (coil_t / p.coil_constant_t_per_a) ** 2

    # -- time ----------------------------------------------------------------------------

    def horizon_s(self) -> float:
        """Time to the next event."""
        if self.quenched:
            busy = abs(self.coil_t) + abs(self.lead_t) > 1e-9
            return self.parameters.quench_decay_s / 10.0 if busy else math.inf
        motion = self._motion()
        horizon = min(self._switch_in_s, motion.holds_s)
        if abs(self.coil_t) > _ENERGIZED_T:
            horizon = min(horizon, self._chance_in_s)
        if motion.acceleration:
            # The stage sees a mean rate in each step.
            horizon = min(horizon, 0.25 * abs(self.supply.rate_t_per_s / motion.acceleration))
        velocity = self.coil_velocity_t_per_s
        if self.warm and self._follow_s:
            away = abs(velocity - self._follow_share * motion.velocity)
            if away > 1e-6 * self._rate_max:
                horizon = min(horizon, 0.5 * self._follow_s)
        if velocity:
            horizon = min(horizon, self.shielding.turned_in_s(velocity))
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
        if self.quenched or self._settled:
            return False
        self._settled = True
        if self._switch_in_s <= 0.0 and self._turn_switch():
            return True
        if self._chance_in_s <= 0.0:
            self._chance_in_s = self._next_chance_s()
            return True
        velocity = self.coil_velocity_t_per_s if self.warm else 0.0
        if (velocity or abs(self.coil_t) > _ENERGIZED_T) and self.heat.is_too_warm(self.coil_t):
            return True
        return velocity != 0.0 and self._too_fast(velocity)

    def _turn_switch(self) -> bool:
        """The switch has followed its heater; True if the coil quenches by it."""
        self._switch_in_s = math.inf
        self.warm = self.heater
        self._moving = None
        if not self.warm:
            self.persistent_t = self.coil_t
        elif abs(self.lead_t - self.coil_t) > self.parameters.switch_mismatch_t:
            return True
        elif not self._follow_s and self.coil_t != self.lead_t:
            before_j, self.coil_t = self.energy_j, self.lead_t
            gained_j = self.energy_j - before_j
            if gained_j > 0:
                self.account.work_j += gained_j
            else:
                self.account.switch_j -= gained_j
        return False

    def advance(self, duration_s: float, points: int = 3) -> list[float]:
        """Move by a time not beyond `horizon_s`.

        Returns
        -------
        list of float
            Field at the sample at ``points`` equal steps of the time, its start included.
        """
        motion = self._motion()
        leads, coils = self._courses(motion, duration_s)
        source = self._source(coils, motion, duration_s, points)
        path = self._behind(source, duration_s / points)
        start_t, end_t = self.coil_t, coils(duration_s)
        if start_t or end_t or self.lead_t:
            self._book(motion, leads, coils, duration_s)
        self.shielding.added_t = self._shielding_after(end_t - start_t)
        if abs(start_t) > _ENERGIZED_T and not self.quenched:
            self._chance_in_s -= duration_s
        if self.quenched:
            end_t = _gone(end_t)
            self.supply.output_t = _gone(leads(duration_s))
        else:
            self.supply.advance(motion, duration_s)
        at_leads = self.warm and not self._follow_s and not self.quenched
        self.coil_t = self.lead_t if at_leads else end_t
        lags = self.parameters.field_lag_s > 0.0
        self.sample_t = path[-1] if lags else self.coil_t + self.shielding.added_t
        self._switch_in_s = max(0.0, self._switch_in_s - duration_s)
        self._changed()
        return path

    def _courses(
        self, motion: Motion, duration_s: float
    ) -> tuple[Callable[[float], float], Callable[[float], float]]:
        """Leads and coil as functions of the time from now on, both as field."""
        p = self.parameters
        lead_t, coil_t = self.lead_t, self.coil_t
        if self.quenched:
            fall = 1 / p.quench_decay_s
            return (
                lambda s: lead_t * math.exp(-s * fall),
                lambda s: coil_t * math.exp(-s * fall),
            )

        def leads(s: float) -> float:
            return self.supply.at(motion, s)

        if not self.warm:
            decay = self._decay_per_s
            return leads, lambda s: coil_t * math.exp(-s * decay) if decay else coil_t
        if not self._follow_s:
            return leads, leads
        lag, share = self._follow_s, self._follow_share
        v, a = share * motion.velocity, share * motion.acceleration
        offset = coil_t - (share * lead_t - lag * v + lag * lag * a)

        def follows(s: float) -> float:
            steady = share * leads(s) - lag * (v + a * s) + lag * lag * a
            return steady + offset * math.exp(-s / lag)

        return leads, follows

    def _source(
        self, coils: Callable[[float], float], motion: Motion, duration_s: float, points: int
    ) -> list[float]:
        """Field of coil and shielding at equal steps of the coming time."""
        step_s = duration_s / points
        start_t = self.coil_t
        if self.parameters.remanence_t:
            fields = (coils(step_s * i) for i in range(points + 1))
            return [b + self._shielding_after(b - start_t) for b in fields]
        straight = not self.quenched and not motion.acceleration
        if straight and (not self._follow_s or not self.warm) and not self._decay_per_s:
            rise = motion.velocity * step_s if self.warm else 0.0
            return [start_t + rise * i for i in range(points + 1)]
        return [coils(step_s * i) for i in range(points + 1)]

    def _shielding_after(self, change_t: float) -> float:
        """Normal metal shields nothing."""
        return 0.0 if self.quenched else self.shielding.after(change_t)

    def _behind(self, source: list[float], step_s: float) -> list[float]:
        """The sample's field behind its lag; the source is straight between the points."""
        lag = self.parameters.field_lag_s
        if lag <= 0.0:
            return source
        decay = math.exp(-step_s / lag)
        path = [self.sample_t]
        for before, after in pairwise(source):
            velocity = (after - before) / step_s
            offset = path[-1] - before + velocity * lag
            path.append(after - velocity * lag + offset * decay)
        return path

    def _book(
        self,
        motion: Motion,
        leads: Callable[[float], float],
        coils: Callable[[float], float],
        duration_s: float,
    ) -> None:
        """Where the energy goes meanwhile: Simpson's rule, exact while the current is straight."""
        p, account = self.parameters, self.account
        k = p.coil_constant_t_per_a
        work = lead_heat = switch_heat = joint_heat = 0.0
        for weight, s in ((1, 0.0), (4, 0.5 * duration_s), (1, duration_s)):
            lead_t, coil_t = leads(s), coils(s)
            velocity = self._velocity_at(motion, lead_t, coil_t, s)
            lead_a, coil_a = lead_t / k, coil_t / k
            if not self.quenched:  # after a quench the supply gives nothing
                work += weight * self._voltage_v(lead_t, coil_t, velocity) * lead_a
            lead_heat += weight * p.lead_resistance_ohm * lead_a * lead_a
            if not self.quenched:
                joint_heat += weight * p.joint_resistance_ohm * coil_a * coil_a
                if self.warm and self._follow_s:
                    switch_heat += weight * p.switch_resistance_ohm * (lead_a - coil_a) ** 2
        sixth = duration_s / 6
        account.work_j += work * sixth
        account.leads_j += lead_heat * sixth
        account.switch_j += switch_heat * sixth
        account.joints_j += joint_heat * sixth
        if self.quenched:
            released_j = self.energy_j - self._stored_j(coils(duration_s))
            account.quench_j += released_j - lead_heat * sixth

    def _velocity_at(self, motion: Motion, lead_t: float, coil_t: float, s: float) -> float:
        if self.quenched or not self.warm or self._follow_s:
            return 0.0  # the terminal voltage does not ask for it
        return motion.velocity + motion.acceleration * s


def _gone(field_t: float) -> float:
    """What is left of a collapse, and at last nothing."""
    return field_t if abs(field_t) > 1e-9 else 0.0
