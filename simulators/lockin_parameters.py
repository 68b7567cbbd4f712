"""What a lock-in and its wiring are made of, with what is allowed of each."""

import itertools
import math
from dataclasses import dataclass
from typing import Literal

FULL_SCALE_MIN_V = 1e-9
FULL_SCALE_MAX_V = 10.0
_THIRD_HARMONIC_MAX = 0.3


@dataclass(frozen=True, slots=True)
class LockInParameters:
    """One lock-in with its wiring. Voltages and currents are rms.

    Attributes
    ----------
    name : str
        The rig's name of the instrument.
    measures : {"longitudinal", "hall"}
        Which voltage of the sample.
    noise_v_per_rthz : float
        One-sided density of the white noise at the input, in X and in Y.
    noise_corner_hz : float
        Where 1/f noise has the power of the white noise: the density squared is
        white^2 (1 + corner / f) at the frequency f that is detected.
    johnson_noise : bool
        Adds 4 k T R of the sample to the density squared.
    series_resistance_ohm : float
        The oscillator drives the current amplitude / this, taken as an ideal source.
    pickup_v_s_per_t : float
        Voltage in phase with the sample's per dB/dt at the sample, from the area of the loops.
    wiring_phase_rad : float
        Phase of the sample's voltage ahead of the oscillator, at every frequency; harmonic n
        has n times as much.
    coupling_per_hz : float
        Voltage in quadrature, ahead of the oscillator, per amplitude and frequency: stray
        capacitance and inductance.
    third_harmonic : float
        Third harmonic of the sample's voltage over the linear sample's voltage, at the current
        `third_harmonic_at_a`; goes with the square of the current.
    mains_v : tuple of float
        Pickup of the line and its harmonics, from the first.
    mains_phase_rad : float
        Phase of the line at the start of the world; its harmonic k has k times as much.
    knock_v_s : float
        Area of the demodulated impulse that a knock on the cryostat gives.
    knock_step_v : float
        Voltage by which a knock displaces the demodulated input, until the next knock.
    full_scales_v : tuple of float
        Ranges that the instrument has, rising; none: any full scale.
    input_range_v : float
        Largest peak voltage that the input takes.
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
    noise_corner_hz: float = 0.0
    johnson_noise: bool = False
    wiring_phase_rad: float = 0.0
    coupling_per_hz: float = 0.0
    third_harmonic: float = 0.0
    third_harmonic_at_a: float = 1e-6
    mains_v: tuple[float, ...] = ()
    mains_phase_rad: float = 0.0
    knock_v_s: float = 0.0
    knock_step_v: float = 0.0
    full_scales_v: tuple[float, ...] = ()
    input_range_v: float = math.inf

    def __post_init__(self) -> None:
        if self.measures not in {"longitudinal", "hall"}:
            raise ValueError(
                f"lock-in {self.name} measures {self.measures!r}; "
                "allowed are 'longitudinal' and 'hall'"
            )
        for key in ("noise_v_per_rthz", "noise_corner_hz", "knock_v_s", "knock_step_v"):
            self._check(key, getattr(self, key), 0.0, math.inf)
        for value in self.mains_v:
            self._check("mains_v", value, 0.0, math.inf)
        most = _THIRD_HARMONIC_MAX
        self._check("third_harmonic", self.third_harmonic, -most, most)
        for key in ("third_harmonic_at_a", "input_range_v", "series_resistance_ohm"):
            self._check(key, getattr(self, key), 5e-324, math.inf)
        for value in self.full_scales_v:
            self._check("full_scales_v", value, FULL_SCALE_MIN_V, FULL_SCALE_MAX_V)
        if any(low >= high for low, high in itertools.pairwise(self.full_scales_v)):
            raise ValueError(
                f"full_scales_v of lock-in {self.name} is {self.full_scales_v}; allowed is rising"
            )

    def _check(self, key: str, value: float, least: float, most: float) -> None:
        if not least <= value <= most:
            low = "above 0" if least == 5e-324 else f"{least:g}"
            raise ValueError(
                f"{key} of lock-in {self.name} is {value:g}; allowed is {low} to {most:g}"
            )


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What reaches every lock-in of the rig.

    Attributes
    ----------
    mains_hz : float
        Frequency of the line.
    knocks_per_h : float
        Mean rate of knocks on the cryostat, a Poisson process.
    """

    mains_hz: float = 50.0
    knocks_per_h: float = 0.0

    def __post_init__(self) -> None:
        if not 0.0 < self.mains_hz <= 1e4:
            raise ValueError(f"mains_hz is {self.mains_hz:g}; allowed is above 0 to 1e4")
        if not 0.0 <= self.knocks_per_h <= 3600.0:
            raise ValueError(f"knocks_per_h is {self.knocks_per_h:g}; allowed is 0 to 3600")
