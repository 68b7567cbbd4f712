"""A lock-in amplifier: what it measures of the sample, its filter, its noise and its overload."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from simulators import lowpass
from simulators.noise import NoiseSource


@dataclass(frozen=True, slots=True)
class LockInParameters:
    """One lock-in with its wiring.

    Attributes
    ----------
    name : str
        The rig's name of the instrument.
    measures : {"longitudinal", "hall"}
        Which voltage of the sample.
    noise_v_per_rthz : float
        One-sided density of the noise at the input, in X and in Y.
    series_resistance_ohm : float
        The oscillator drives the current amplitude / this, taken as an ideal source.
    pickup_v_s_per_t : float
        Voltage in X per dB/dt at the sample, from the area of the loops.
    time_constant_s, order, full_scale_v, amplitude_v, frequency_hz : float
        Settings at power on.
    """

    name: str
    measures: Literal["longitudinal", "hall"] = "longitudinal"
    noise_v_per_rthz: float = 5e-9
    series_resistance_ohm: float = 1e6
    pickup_v_s_per_t: float = 0.0
    time_constant_s: float = 0.3
    order: int = 4
    full_scale_v: float = 1e-3
    amplitude_v: float = 1.0
    frequency_hz: float = 77.7


ADC_STEPS = 2**19
"""Steps from zero to full scale in the reply."""


class LockIn:
    """State of one lock-in."""

    def __init__(self, parameters: LockInParameters, noise: NoiseSource) -> None:
        p = parameters
        self.parameters = p
        self._noise_source = noise
        self.reset()

    def reset(self) -> None:
        """Settings as at power on; the filter starts from nothing."""
        p = self.parameters
        self.time_constant_s = p.time_constant_s
        self.order = p.order
        self.full_scale_v = p.full_scale_v
        self.amplitude_v = p.amplitude_v
        self.frequency_hz = p.frequency_hz
        self._state = np.zeros(p.order)
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
        self._shown = None

    def set_order(self, order: int) -> None:
        """New number of poles; added poles start at the old output."""
        old = self._state
        self.order = order
        self._state = np.array([old[min(k, len(old) - 1)] for k in range(order)])
        self._settle_noise()

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
        values = np.array(ohms) * self.current_a
        if rates_t_per_s is not None and self.parameters.pickup_v_s_per_t:
            values += np.array(rates_t_per_s) * self.parameters.pickup_v_s_per_t
        pieces = (len(values) - 1) // lowpass.NODES_PER_PIECE
        m, w = lowpass.response(self.order, duration_s / self.time_constant_s, pieces)
        self._state = m @ self._state + w @ values
        self._noise_due_s += duration_s
        self._shown = None

    def _catch_up(self) -> None:
        """Bring the noise up to now: one exact step, however long."""
        if self._noise_due_s > 0.0:
            m, c = lowpass.noise_step(self.order, self._noise_due_s / self.time_constant_s)
            self._noise = m @ self._noise + c @ self._noise_source.take_pairs(self.order)
            self._noise_due_s = 0.0

    # -- what can be seen ----------------------------------------------------------------------

    @property
    def current_a(self) -> float:
        """Current through the sample, rms."""
        return self.amplitude_v / self.parameters.series_resistance_ohm

    @property
    def clean_x_v(self) -> float:
        """X before noise, limit and digitising."""
        return float(self._state[-1])

    def output_v(self) -> tuple[float, float]:
        """X and Y of one instant, neither limited nor digitised."""
        if self._shown is not None:
            return self._shown
        self._catch_up()
        scale = self.parameters.noise_v_per_rthz / math.sqrt(self.time_constant_s)
        x, y = self._noise[-1].tolist()
        self._shown = float(self._state[-1]) + scale * x, scale * y
        return self._shown

    @property
    def overload(self) -> bool:
        """Whether the output is beyond full scale."""
        x, y = self.output_v()
        return abs(x) > self.full_scale_v or abs(y) > self.full_scale_v

    def read(self) -> tuple[float, float]:
        """X and Y as shown: limited to full scale and digitised, V rms."""
        step = self.full_scale_v / ADC_STEPS
        x, y = self.output_v()
        return _digits(x / step) * step, _digits(y / step) * step


def _digits(steps: float) -> int:
    return round(min(ADC_STEPS, max(-ADC_STEPS, steps)))
