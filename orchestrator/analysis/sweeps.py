"""One field sweep as the analysis takes it, with the lock-in filter's lag and loss put right."""

import math
from dataclasses import dataclass, field, replace

import numpy as np
import numpy.typing as npt

from orchestrator.physics import lockin

FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]

LEAST_POINTS = 40
"""Fewer points of a moving field than this are not analysed."""

_LOWEST_PART = 25.0  # fields below the largest / 25 hold no usable period of 1/B
_STEADY_POINTS = 15  # samples over which rate and temperature are smoothed


class AnalysisError(ValueError):
    """The data cannot be analysed. The message says which sweep and why, in plain words."""


@dataclass(frozen=True)
class Sweep:
    """Readings of one field sweep, as measured.

    Attributes
    ----------
    name : str
        What the sweep is called in messages.
    direction : int
        +1 for rising field, -1 for falling.
    time_s, field_t, temperature_k, resistance_ohm : array
        One value per sample, of equal length; time rises.
    hall_ohm : array or None
        Hall resistance, where measured.
    time_constant_s : float
        The lock-in filter's time constant; 0 where no filter is known.
    poles : int
        The filter's number of poles.
    """

    name: str
    direction: int
    time_s: FloatArray
    field_t: FloatArray
    temperature_k: FloatArray
    resistance_ohm: FloatArray
    hall_ohm: FloatArray | None = None
    time_constant_s: float = 0.0
    poles: int = 1

    def lag_corrected(self) -> "MovingSweep":
        """The samples taken while the field moved, each at the field its reading belongs to.

        A reading of a filter with n poles of time constant tau tells of the sample n tau earlier.
        The readings stay; the field is interpolated to that time.

        Raises
        ------
        AnalysisError
            If values are missing, lengths differ, time does not rise, fewer than 40 points are
            left, or the field does not move.
        """
        self._check()
        lag = lockin.lag_s(self.time_constant_s, self.poles)
        then = self.time_s - lag
        size = np.abs(np.interp(then, self.time_s, self.field_t))
        moved = _smooth(np.gradient(np.abs(self.field_t), self.time_s), 5)
        rate = np.asarray(np.interp(then, self.time_s, moved), dtype=np.float64)
        inside = _moving_part(rate) & (then >= self.time_s[0]) & (size > size.max() / _LOWEST_PART)
        if int(inside.sum()) < LEAST_POINTS:
            raise AnalysisError(
                f'sweep "{self.name}": {int(inside.sum())} points of moving field, '
                f"allowed: {LEAST_POINTS} or more"
            )
        return MovingSweep(
            name=self.name,
            direction=self.direction,
            field_t=size[inside],
            rate_t_per_s=rate[inside],
            temperature_k=_smooth(self.temperature_k, _STEADY_POINTS)[inside],
            resistance_ohm=self.resistance_ohm[inside],
            time_constant_s=self.time_constant_s,
            poles=self.poles,
            interval_s=float(np.median(np.diff(self.time_s))),
        )

    def _check(self) -> None:
        columns = {
            "time_s": self.time_s,
            "field_t": self.field_t,
            "temperature_k": self.temperature_k,
            "resistance_ohm": self.resistance_ohm,
        }
        for name, values in columns.items():
            if values.shape != self.time_s.shape or values.ndim != 1:
                raise AnalysisError(
                    f'sweep "{self.name}": {name} has {values.size} values, '
                    f"allowed: {self.time_s.size}, as time_s"
                )
            bad = np.flatnonzero(~np.isfinite(values))
            if bad.size:
                raise AnalysisError(
                    f'sweep "{self.name}": {name} is {values[bad[0]]} at point {bad[0] + 1} '
                    f"({bad.size} such points), allowed: finite numbers"
                )
        if self.time_s.size < LEAST_POINTS:
            raise AnalysisError(
                f'sweep "{self.name}": {self.time_s.size} points, allowed: {LEAST_POINTS} or more'
            )
        if np.any(np.diff(self.time_s) <= 0):
            raise AnalysisError(f'sweep "{self.name}": time_s does not rise from point to point')
        if float(np.ptp(self.field_t)) <= 1e-6 * float(np.max(np.abs(self.field_t))):
            raise AnalysisError(
                f'sweep "{self.name}": the field stays at {self.field_t[0]:g} T, '
                "allowed: a field that moves"
            )
        if np.any(self.temperature_k <= 0):
            raise AnalysisError(
                f'sweep "{self.name}": temperature_k is {self.temperature_k.min():g} K, '
                "allowed: above 0 K"
            )


@dataclass(frozen=True)
class MovingSweep:
    """Samples of a moving field, each at the field it belongs to.

    Attributes
    ----------
    field_t : array
        Absolute field in tesla at the time the reading tells of.
    rate_t_per_s : array
        Rate of the absolute field at that time, signed.
    temperature_k : array
        Temperature smoothed over 15 samples.
    resistance_ohm : array
        Resistance as measured.
    interval_s : float
        Median time between samples.
    """

    name: str
    direction: int
    field_t: FloatArray
    rate_t_per_s: FloatArray
    temperature_k: FloatArray
    resistance_ohm: FloatArray
    time_constant_s: float
    poles: int
    interval_s: float
    inverse_field_per_t: FloatArray = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "inverse_field_per_t", 1 / self.field_t)

    def response(self, frequency_t: float) -> ComplexArray:
        """What the filter leaves of exp(i 2 pi F / B), beyond the lag already put right.

        The absolute value is the surviving amplitude |H(F |dB/dt| / B^2)|; the phase is what the
        filter shifts beyond n tau, which matters only near its cut-off.

        Parameters
        ----------
        frequency_t : float
            Oscillation frequency in tesla.

        Returns
        -------
        complex array
            One value per sample.
        """
        if self.time_constant_s == 0:
            return np.ones(self.field_t.shape, dtype=np.complex128)
        met_hz = -frequency_t * self.rate_t_per_s * self.inverse_field_per_t**2
        lag = lockin.lag_s(self.time_constant_s, self.poles)
        shift = np.exp(2j * math.pi * lag * met_hz)
        response = lockin.filter_response(met_hz, self.time_constant_s, self.poles) * shift
        return np.asarray(response, dtype=np.complex128)

    def without(self, kept: npt.NDArray[np.bool_]) -> "MovingSweep":
        """The same sweep with only the samples marked true."""
        return replace(
            self,
            field_t=self.field_t[kept],
            rate_t_per_s=self.rate_t_per_s[kept],
            temperature_k=self.temperature_k[kept],
            resistance_ohm=self.resistance_ohm[kept],
        )


def _smooth(values: FloatArray, width: int) -> FloatArray:
    """Moving mean of odd width; the ends average over what there is."""
    width = min(width, 2 * ((values.size - 1) // 2) + 1)
    sums = np.concatenate(([0.0], np.cumsum(values - values[0])))
    index = np.arange(values.size)
    half = np.minimum(width // 2, np.minimum(index, values.size - 1 - index))
    means = values[0] + (sums[index + half + 1] - sums[index - half]) / (2 * half + 1)
    return np.asarray(means, dtype=np.float64)


def _moving_part(rate: FloatArray) -> npt.NDArray[np.bool_]:
    """True from the first to the last sample at which the field moves."""
    moving = np.flatnonzero(np.abs(rate) > 0.02 * np.median(np.abs(rate[rate != 0])))
    inside = np.zeros(rate.shape, dtype=np.bool_)
    if moving.size:
        inside[moving[0] : moving[-1] + 1] = True
    return inside
