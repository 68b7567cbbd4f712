"""The magnet supply's ramp generator: rate, target, its own rate table, and how fast it slews.

The output is kept as the field that its current makes in the coil. Between two events it moves with
a constant acceleration, so that everything is closed form.
"""

import math
from typing import NamedTuple

from simulators.coil_parameters import CoilParameters

_ARRIVED_T = 1e-9
_ROUNDING = 1e-9


class Motion(NamedTuple):
    """Signed velocity (T/s) and acceleration (T/s^2) now, and for how many seconds they hold."""

    velocity: float
    acceleration: float
    holds_s: float


_REST = Motion(0.0, 0.0, math.inf)


class Supply:
    """State of the ramp generator."""

    def __init__(self, parameters: CoilParameters) -> None:
        self._p = parameters
        self.target_t = 0.0
        self.rate_t_per_s = parameters.default_rate_t_per_s
        self.ramping = False
        self.output_t = 0.0
        self.velocity = 0.0  # only where the supply slews; else it follows from the rate

    def stop(self, output_t: float) -> None:
        """At rest at an output, whatever it was doing."""
        self.ramping = False
        self.velocity = 0.0
        self.output_t = output_t

    def motion(self, most_t_per_s: float) -> Motion:
        """What the output does now; the charge voltage allows ``most_t_per_s``."""
        slew = self._p.slew_t_per_s2
        way = self.target_t - self.output_t
        if not slew:
            if not self.ramping or way == 0.0:
                return _REST
            rate = self._rate(most_t_per_s)
            holds = min(abs(way) / rate, self._to_edge_t(math.copysign(1.0, way)) / rate)
            return Motion(math.copysign(rate, way), 0.0, holds)
        return self._slewing(way, slew, most_t_per_s)

    def _slewing(self, way: float, slew: float, most_t_per_s: float) -> Motion:
        v = self.velocity
        if not v and (not self.ramping or abs(way) <= _ARRIVED_T):
            return _REST
        speed = abs(v)
        towards = math.copysign(1.0, v or way)
        braking = speed * speed / (2 * slew)
        away = v * way < 0
        if not self.ramping or away or braking >= abs(way) * (1 - _ROUNDING):
            return Motion(v, -towards * slew, speed / slew)
        goal = self._rate(most_t_per_s)
        edge = self._to_edge_t(towards)
        if speed < goal * (1 - _ROUNDING):
            # Up to the rate, or to where braking must begin, or to the table's next zone.
            peak = math.sqrt(slew * abs(way) + speed * speed / 2)
            at_edge = math.sqrt(speed * speed + 2 * slew * edge)
            return Motion(v, towards * slew, (min(goal, peak, at_edge) - speed) / slew)
        if speed > goal * (1 + _ROUNDING):
            return Motion(v, -towards * slew, (speed - goal) / slew)
        return Motion(v, 0.0, min(abs(way) - braking, edge) / speed)

    def _rate(self, most_t_per_s: float) -> float:
        rate = min(self.rate_t_per_s, most_t_per_s)
        table = self._p.supply_rates
        if table:
            outward = self.output_t * (self.target_t - self.output_t) >= 0
            size = abs(self.output_t) + (_ROUNDING if outward else -_ROUNDING) * 10
            rate = min(rate, next((r for up_to, r in table if size <= up_to), table[-1][1]))
        return rate

    def _to_edge_t(self, towards: float) -> float:
        """Way to the next edge of the supply's table, T."""
        if not self._p.supply_rates:
            return math.inf
        here = self.output_t * towards
        edges = [edge for edge, _ in self._p.supply_rates]
        ahead = [e for e in (*(-e for e in edges), 0.0, *edges) if e > here + _ROUNDING]
        return min(ahead) - here if ahead else math.inf

    def advance(self, motion: Motion, duration_s: float) -> None:
        """Move by a time not beyond what the motion holds for."""
        if motion is _REST:
            return
        self.output_t = self.at(motion, duration_s)
        ends = duration_s >= motion.holds_s * (1 - 1e-12)
        if self._p.slew_t_per_s2:
            self.velocity = motion.velocity + motion.acceleration * duration_s
            if ends and motion.velocity * motion.acceleration < 0 and abs(self.velocity) < 1e-12:
                self.velocity = 0.0
        if ends and abs(self.output_t - self.target_t) <= _ARRIVED_T:
            self.output_t = self.target_t
            self.velocity = 0.0

    def at(self, motion: Motion, later_s: float) -> float:
        """Output after a part of the motion."""
        return self.output_t + (motion.velocity + 0.5 * motion.acceleration * later_s) * later_s
