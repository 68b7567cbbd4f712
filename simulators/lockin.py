"""A lock-in amplifier: what it measures of the sample, its filter, its noise and its overload."""

import cmath
import math
from collections.abc import Callable, Sequence

import numpy as np

from simulators import lowpass
from simulators.interference import Interference, Tuning
from simulators.lockin_parameters import FULL_SCALE_MIN_V, LockInParameters
from simulators.noise import NoiseSource, flicker

__all__ = ["LockIn", "LockInParameters"]

ADC_STEPS = 2**19
"""Steps from zero to full scale in the reply."""

HEADROOM = 1.25
"""Automatic ranging takes a full scale of at least the present output times this."""

_SAME = 1 + 1e-9  # a range asked for by its value, after somebody's arithmetic


class LockIn:
    """State of one lock-in.

    Parameters
    ----------
    parameters : LockInParameters
    noise : NoiseSource
        Stream of the noise at the input.
    interference : Interference, optional
        What comes in beside the sample's voltage; none, if left out.
    johnson_v2_per_hz : callable, optional
        Density of the sample's own noise at this moment, V^2/Hz.
    """

    def __init__(
        self,
        parameters: LockInParameters,
        noise: NoiseSource,
        interference: Interference | None = None,
        johnson_v2_per_hz: Callable[[], float] | None = None,
    ) -> None:
        self.parameters = parameters
        self._noise_source = noise
        self._interference = interference or Interference(parameters)
        self._johnson_v2_per_hz = johnson_v2_per_hz if parameters.johnson_noise else None
        self._white = not (parameters.noise_corner_hz or self._johnson_v2_per_hz)
        self._ohm = self._pickup_v = 0.0
        self.reset()

    def reset(self) -> None:
        """Settings as at power on; the filter starts from nothing."""
        p = self.parameters
        self.time_constant_s = p.time_constant_s
        self.order = p.order
        self.full_scale_v = self.range_for_v(p.full_scale_v)
        self.amplitude_v = p.amplitude_v
        self.frequency_hz = p.frequency_hz
        self.phase_rad = 0.0
        self.harmonic = 1
        self._state = np.zeros(p.order)
        self._turn = self._turned()
        self._interference.empty()
        self._tune()
        self._density_v_per_rthz = self._density_now()
        self._settle_noise()

    def _settle_noise(self) -> None:
        self._noise = lowpass.stationary_noise(self.order) @ self._noise_source.take_pairs(
            self.order
        )
        self._noise_due_s = 0.0
        self._shown: tuple[float, float] | None = None

    # -- orders --------------------------------------------------------------------------------

    def set_time_constant(self, time_constant_s: float) -> None:
        """New tau; the filter's state stays, as in a real cascade."""
        self._catch_up()
        self._noise *= math.sqrt(time_constant_s / self.time_constant_s)
        self.time_constant_s = time_constant_s
        self._tune()

    def set_order(self, order: int) -> None:
        """New number of poles; added poles start at the old output."""
        old = self._state
        self.order = order
        self._state = np.array([old[min(k, len(old) - 1)] for k in range(order)])
        self._settle_noise()
        self._tune()

    def set_amplitude(self, amplitude_v: float) -> None:
        """New amplitude of the oscillator."""
        self.amplitude_v = amplitude_v
        self._tune()

    def set_frequency(self, frequency_hz: float) -> None:
        """New frequency of the oscillator, which is the reference."""
        self._catch_up()
        self.frequency_hz = frequency_hz
        self._tune()

    def set_phase(self, phase_rad: float) -> None:
        """Phase of the mixer behind the oscillator: X + iY is multiplied by exp(-i phase)."""
        self.phase_rad = phase_rad
        self._tune()

    def set_harmonic(self, harmonic: int) -> None:
        """Detect this multiple of the oscillator's frequency."""
        self._catch_up()
        self.harmonic = harmonic
        self._tune()

    def range_for_v(self, full_scale_v: float) -> float:
        """Smallest full scale that takes this voltage, or the largest; any, if there is no list."""
        ranges_v = self.parameters.full_scales_v
        if not ranges_v:
            return full_scale_v
        return next((r for r in ranges_v if r * _SAME >= full_scale_v), ranges_v[-1])

    def set_range(self, full_scale_v: float) -> None:
        """Take the range for this voltage."""
        self.full_scale_v = self.range_for_v(full_scale_v)

    def range_once(self) -> None:
        """Take the smallest range that holds the present output with headroom.

        Where any full scale will do, one of 1, 2, 5 times a power of ten.
        """
        wanted_v = HEADROOM * max(map(abs, self.output_v()))
        if not self.parameters.full_scales_v:
            wanted_v = _one_two_five(max(wanted_v, FULL_SCALE_MIN_V))
        self.set_range(wanted_v)

    def _turned(self) -> complex:
        """Turn of the sample's voltage from its own phase to the mixer's output."""
        angle = self.harmonic * self.parameters.wiring_phase_rad - self.phase_rad
        return cmath.exp(1j * angle)

    def _tune(self) -> None:
        """Put the settings in force; what is in the poles stays there."""
        turn, left = self._turned(), None
        if turn != self._turn:
            left = [(self._turn - turn) * value for value in self._state.tolist()]
            self._turn = turn
        self._interference.tune(
            Tuning(
                self.time_constant_s, self.order, self.frequency_hz, self.harmonic,
                self.phase_rad, self.amplitude_v,
            ),
            left,
        )  # fmt: skip
        self._shown = None

    # -- time ----------------------------------------------------------------------------------

    def advance(
        self, duration_s: float, ohms: Sequence[float], rates_t_per_s: Sequence[float] | None
    ) -> None:
        """Filter the signal over a time.

        Parameters
        ----------
        duration_s : float
            Length of the time.
        ohms : sequence of float
            Resistance at 3 n + 1 equally spaced instants, start and end included.
        rates_t_per_s : sequence of float or None
            dB/dt at the same instants; None where the field stands still.
        """
        values = np.array(ohms) * (self.current_a * self._gain())
        pickup = self.parameters.pickup_v_s_per_t if rates_t_per_s is not None else 0.0
        self._ohm, self._pickup_v = ohms[-1], 0.0
        if rates_t_per_s is not None and pickup:
            self._pickup_v = pickup * rates_t_per_s[-1]
            if self.harmonic == 1:
                values += np.array(rates_t_per_s) * pickup
        pieces = (len(values) - 1) // lowpass.NODES_PER_PIECE
        m, w = lowpass.response(self.order, duration_s / self.time_constant_s, pieces)
        self._state = m @ self._state + w @ values
        self._noise_due_s += duration_s
        self._shown = None

    def _gain(self) -> float:
        """Voltage at the detected harmonic over the linear sample's at the first.

        R i + c i^3 at the current sqrt(2) I cos(w t): with e = c I^2 / (2 R), 1 + 3 e at the
        first harmonic and e at the third, in phase.
        """
        p = self.parameters
        if not p.third_harmonic:
            return 1.0 if self.harmonic == 1 else 0.0
        share = p.third_harmonic * (self.current_a / p.third_harmonic_at_a) ** 2
        return {1: 1.0 + 3.0 * share, 3: share}.get(self.harmonic, 0.0)

    def _density_now(self) -> float:
        """One-sided density of the noise that is detected at this moment, V/sqrt(Hz)."""
        p = self.parameters
        if self._white:
            return p.noise_v_per_rthz
        detected_hz = self.harmonic * self.frequency_hz
        square = p.noise_v_per_rthz**2 * flicker(p.noise_corner_hz, detected_hz)
        if self._johnson_v2_per_hz is not None:
            square += self._johnson_v2_per_hz()
        return math.sqrt(square)

    def _catch_up(self) -> None:
        """Bring the noise up to now: one exact step, however long, of the density of now."""
        if self._noise_due_s > 0.0:
            if not self._white:
                density = self._density_now()
                if density > 0.0:
                    self._noise *= self._density_v_per_rthz / density
                self._density_v_per_rthz = density
            m, c = lowpass.noise_step(self.order, self._noise_due_s / self.time_constant_s)
            self._noise = m @ self._noise + c @ self._noise_source.take_pairs(self.order)
            self._noise_due_s = 0.0

    # -- what can be seen ----------------------------------------------------------------------

    @property
    def current_a(self) -> float:
        """Current through the sample, rms, at the oscillator's frequency."""
        return self.amplitude_v / self.parameters.series_resistance_ohm

    @property
    def clean_x_v(self) -> float:
        """X before noise, limit and digitising."""
        return self.clean_v().real

    def clean_v(self) -> complex:
        """X + i Y before noise, limit and digitising."""
        signal = float(self._state[-1])
        if self._interference.silent and self._turn == 1.0:
            return complex(signal)
        return self._turn * signal + self._interference.output_v()

    def output_v(self) -> tuple[float, float]:
        """X and Y of one instant, neither limited nor digitised."""
        if self._shown is not None:
            return self._shown
        self._catch_up()
        scale = self._density_v_per_rthz / math.sqrt(self.time_constant_s)
        x, y = self._noise[-1].tolist()
        clean = self.clean_v()
        self._shown = clean.real + scale * x, clean.imag + scale * y
        return self._shown

    @property
    def overload(self) -> bool:
        """Whether the output is beyond full scale."""
        x, y = self.output_v()
        return abs(x) > self.full_scale_v or abs(y) > self.full_scale_v

    @property
    def input_peak_v(self) -> float:
        """Largest that the voltage at the input comes to at this moment, without its noise.

        The sum of the peaks of all that comes in: different frequencies meet sooner or later.
        """
        p = self.parameters
        linear = self.current_a * self._ohm
        third = linear * p.third_harmonic * (self.current_a / p.third_harmonic_at_a) ** 2
        signal = (linear + 3.0 * third + self._pickup_v) * cmath.exp(1j * p.wiring_phase_rad)
        return math.sqrt(2.0) * (self._interference.raw_v(signal) + abs(third))

    @property
    def input_overload(self) -> bool:
        """Whether the voltage at the input is beyond the input's range."""
        limit_v = self.parameters.input_range_v
        return math.isfinite(limit_v) and self.input_peak_v > limit_v

    def read(self) -> tuple[float, float]:
        """X and Y as shown: limited to full scale and digitised, V rms."""
        step = self.full_scale_v / ADC_STEPS
        x, y = self.output_v()
        return _digits(x / step) * step, _digits(y / step) * step


def _digits(steps: float) -> int:
    return round(min(ADC_STEPS, max(-ADC_STEPS, steps)))


def _one_two_five(least: float) -> float:
    """Smallest of 1, 2, 5 times a power of ten that is not below."""
    decade = 10.0 ** math.floor(math.log10(least))
    return next(m * decade for m in (1.0, 2.0, 5.0, 10.0) if m * decade * _SAME >= least)
