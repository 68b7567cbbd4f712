"""What reaches a lock-in's filter beside the sample's voltage: stray coupling, mains, knocks.

Each is a line exp(i w t) at the mixer's output, or an impulse. Behind n poles a line is, for ever,
D exp(i w t) (1 + i w tau)^-k in pole k; what else is in the poles decays freely. Whatever jumps
(a setting, a knock) leaves the difference to the free part, so that the output is exact at any
instant and costs nothing in between. Times of knocks do not depend on who looks.
"""

import cmath
import math
from collections.abc import Callable
from dataclasses import dataclass

from simulators.lockin_parameters import LockInParameters, Surroundings
from simulators.lowpass import decayed
from simulators.noise import NoiseSource

_GONE_V = 1e-18
"""Free part that cannot be seen any more: the smallest step of any range is 2e-15 V."""


class Knocks:
    """Knocks on the cryostat: instants of a Poisson process, and a phase for each.

    Parameters
    ----------
    per_h : float
        Mean rate, above 0.
    start_s : float
        When the world began.
    instants : NoiseSource
        Stream of the instants; lock-ins with streams of one name meet the same knocks.
    phases : NoiseSource
        Stream of the phases.
    """

    def __init__(
        self, per_h: float, start_s: float, instants: NoiseSource, phases: NoiseSource
    ) -> None:
        self._mean_s = 3600.0 / per_h
        self._instants, self._phases = instants, phases
        self.count = 0
        self.next_s = start_s + self._wait_s()

    def _wait_s(self) -> float:
        # Half the sum of two squared normal numbers is exponential with mean 1.
        a, b = self._instants.take(), self._instants.take()
        return 0.5 * self._mean_s * (a * a + b * b)

    def take(self) -> complex:
        """Pass the next knock; a unit number of its phase, which is uniform."""
        self.count += 1
        self.next_s += self._wait_s()
        z = complex(self._phases.take(), self._phases.take())
        return z / abs(z) if z else 1.0 + 0.0j


@dataclass(frozen=True, slots=True)
class Tuning:
    """Settings of a lock-in on which its filter and its mixer depend."""

    time_constant_s: float
    order: int
    frequency_hz: float
    harmonic: int
    phase_rad: float
    amplitude_v: float

    @property
    def detected_hz(self) -> float:
        """Frequency that is mixed down to zero."""
        return self.harmonic * self.frequency_hz


class Interference:
    """The interfering part of what one lock-in's poles hold.

    Parameters
    ----------
    parameters : LockInParameters
    now : callable
        The world's time.
    surroundings : Surroundings
    knocks : Knocks or None
        None if there are none.
    """

    def __init__(
        self,
        parameters: LockInParameters,
        now: Callable[[], float] = lambda: 0.0,
        surroundings: Surroundings | None = None,
        knocks: Knocks | None = None,
    ) -> None:
        self._parameters = parameters
        self._now = now
        self._mains_sum_v = sum(parameters.mains_v)
        self._mains_hz = (surroundings or Surroundings()).mains_hz
        self._start_s = self._last_s = now()
        self.knocks = knocks
        self._displaced = 0.0 + 0.0j  # at the input
        self._turn = 1.0 + 0.0j
        self._tuning: Tuning | None = None
        self._lines: list[tuple[complex, float]] = []
        self._outputs: list[tuple[complex, complex]] = []  # behind all poles; i times frequency
        self._free: list[complex] | None = None
        self.silent = knocks is None

    # -- settings --------------------------------------------------------------------------

    def tune(self, tuning: Tuning, left: list[complex] | None = None) -> None:
        """Put settings in force; what is in the poles stays there, plus `left`.

        Added poles start at the old output. The first time, and after `empty`, nothing is in them.
        """
        held = self._held() if self._tuning else [0j]
        held = [held[min(k, len(held) - 1)] for k in range(tuning.order)]
        if left is not None:
            held = [a + b for a, b in zip(held, left, strict=True)]
        self._tuning = tuning
        self._turn = cmath.exp(-1j * tuning.phase_rad)
        self._lines = self._lines_of(tuning)
        self._outputs = [
            (volts / (1.0 + 1j * omega * tuning.time_constant_s) ** tuning.order, 1j * omega)
            for volts, omega in self._lines
        ]
        forced = self._forced()
        self._set_free([a - b for a, b in zip(held, forced, strict=True)])

    def empty(self) -> None:
        """The poles hold nothing, from now on until `tune`."""
        self._catch_up()
        self._tuning = None

    def _lines_of(self, tuning: Tuning) -> list[tuple[complex, float]]:
        """Amplitude and angular frequency of each line at the mixer's output."""
        p = self._parameters
        lines: list[tuple[complex, float]] = []
        turn = self._turn
        if p.coupling_per_hz and tuning.harmonic == 1:
            lines.append((self._coupled_v(tuning) * turn, 0.0))
        for k, mains_v in enumerate(p.mains_v, start=1):
            if mains_v:
                omega = 2 * math.pi * (k * self._mains_hz - tuning.detected_hz)
                lines.append((mains_v * cmath.exp(1j * k * p.mains_phase_rad) * turn, omega))
        return lines

    def _coupled_v(self, tuning: Tuning) -> complex:
        return 1j * self._parameters.coupling_per_hz * tuning.frequency_hz * tuning.amplitude_v

    # -- time ------------------------------------------------------------------------------

    def _catch_up(self) -> None:
        """Pass the knocks up to now, and let the free part decay."""
        now = self._now()
        knocks = self.knocks
        while knocks is not None and knocks.next_s <= now:
            self._decay(knocks.next_s)
            self._knock(knocks.take())
        self._decay(now)

    def _decay(self, to_s: float) -> None:
        if self._free is not None and self._tuning is not None and to_s > self._last_s:
            step = (to_s - self._last_s) / self._tuning.time_constant_s
            self._set_free(decayed(self._free, step))
        self._last_s = to_s

    def _knock(self, phase: complex) -> None:
        p, tuning = self._parameters, self._tuning
        displaced = p.knock_step_v * phase
        if tuning is not None:
            free = self._free or [0j] * tuning.order
            jump = (self._displaced - displaced) * self._turn
            free = [value + jump for value in free]
            free[0] += p.knock_v_s * phase * self._turn / tuning.time_constant_s
            self._free = free
        self._displaced = displaced

    def _set_free(self, free: list[complex]) -> None:
        self._free = free if max(map(abs, free)) > _GONE_V else None
        self.silent = self._free is None and self.knocks is None and not self._lines

    # -- what is in the poles --------------------------------------------------------------

    def _forced(self) -> list[complex]:
        """What the lines alone make, in each pole; time is that of the last catching up."""
        tuning = self._tuning
        assert tuning is not None
        forced = [self._displaced * self._turn] * tuning.order
        for volts, omega in self._lines:
            response = 1.0 / (1.0 + 1j * omega * tuning.time_constant_s)
            value = volts * cmath.exp(1j * omega * (self._last_s - self._start_s))
            for k in range(tuning.order):
                value *= response
                forced[k] += value
        return forced

    def _held(self) -> list[complex]:
        self._catch_up()
        forced = self._forced()
        if self._free is None:
            return forced
        return [a + b for a, b in zip(forced, self._free, strict=True)]

    def output_v(self) -> complex:
        """Share of the output, X + i Y."""
        self._catch_up()
        since_s = self._last_s - self._start_s
        total = self._displaced * self._turn
        for volts, omega in self._outputs:
            total += volts * cmath.exp(omega * since_s)
        return total if self._free is None else total + self._free[-1]

    def raw_v(self, signal_v: complex) -> float:
        """Largest that the voltage at the input comes to, as the rms of a sine.

        Parameters
        ----------
        signal_v : complex
            The sample's voltage at the oscillator's frequency.
        """
        self._catch_up()
        assert self._tuning is not None
        at_reference = abs(signal_v + self._coupled_v(self._tuning))
        return at_reference + self._mains_sum_v + abs(self._displaced)
