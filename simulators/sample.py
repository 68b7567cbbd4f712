"""The sample: resistance with oscillations periodic in 1/B, and the Hall resistance.

R_xx = R0 (1 + a|B| + b B^2) + R0 sum_j A_j sum_p p^-1/2 R_T R_D R_S cos(2 pi p (F/B - 1/2 + beta)),
R_xy = B / (n e). Lifshitz & Kosevich (1956), Dingle (1952); Shoenberg, Magnetic Oscillations in
Metals (1984). Written with scalar `math` and apart from `orchestrator.physics`: this is the hot
path of a rehearsal, and a second writing of the formula checks the first.
"""

import math
from dataclasses import dataclass

from scipy import constants

from simulators.landau import GasParameters

_DAMPING_T_PER_K = (
    2 * math.pi**2 * constants.k * constants.m_e / (constants.hbar * constants.e)
)  # 14.6932 T/K
FIELD_MIN_T = 1e-4
"""At and below this field there are no oscillations."""


@dataclass(frozen=True, slots=True)
class Orbit:
    """One extremal orbit.

    Attributes
    ----------
    frequency_t : float
        F of the oscillation in 1/B.
    mass : float
        Cyclotron mass, multiples of the electron mass.
    dingle_k : float
        Dingle temperature.
    amplitude : float
        Relative to the zero-field resistance, before any damping.
    phase : float
        beta in the phase 2 pi (F/B - 1/2 + beta).
    harmonics : int
        How many terms p = 1, 2, ... are summed.
    g_factor : float or None
        None leaves the spin factor at 1.
    """

    frequency_t: float
    mass: float
    dingle_k: float
    amplitude: float
    phase: float = 0.0
    harmonics: int = 2
    g_factor: float | None = None


@dataclass(frozen=True, slots=True)
class SampleParameters:
    """Resistances of the sample.

    Attributes
    ----------
    resistance_ohm : float
        R0, at zero field.
    magnetoresistance_per_t, magnetoresistance_per_t2 : float
        a and b of the smooth background.
    hall_density_m2 : float
        Sheet density n in B/(n e); negative for holes' sign.
    orbits : tuple of Orbit
    gas : GasParameters or None
        A two-dimensional gas from its Landau levels, in place of all the above.
    """

    resistance_ohm: float = 100.0
    magnetoresistance_per_t: float = 0.01
    magnetoresistance_per_t2: float = 0.001
    hall_density_m2: float = 5e16
    orbits: tuple[Orbit, ...] = ()
    gas: GasParameters | None = None

    @property
    def mobility_m2_per_v_s(self) -> float:
        """1/(n e R0): the mobility of a square of this sheet, m^2/(V s)."""
        return 1.0 / (abs(self.hall_density_m2) * constants.e * self.resistance_ohm)


class Sample:
    """The parameters made ready for fast evaluation."""

    def __init__(self, parameters: SampleParameters) -> None:
        self.parameters = parameters
        self._hall_ohm_per_t = 1.0 / (parameters.hall_density_m2 * constants.e)
        self._terms = [
            (
                parameters.resistance_ohm * orbit.amplitude / math.sqrt(p) * _spin(orbit, p),
                p * orbit.mass * _DAMPING_T_PER_K,
                orbit.dingle_k,
                2 * math.pi * p * orbit.frequency_t,
                2 * math.pi * p * (orbit.phase - 0.5),
            )
            for orbit in parameters.orbits
            for p in range(1, orbit.harmonics + 1)
        ]
        # Phase that steps must resolve, per 1/B: harmonics are weaker, so they count by half.
        self.phase_t = max(
            (2 * math.pi * o.frequency_t * max(1.0, o.harmonics / 2) for o in parameters.orbits),
            default=0.0,
        )
        self.clear_t = self._clear_above_t()
        self.slowest_t = 2 * math.pi * min((o.frequency_t for o in parameters.orbits), default=0.0)

    def smooth_hall_ohm(self, field_t: float) -> float:
        """R_xy, odd in the field."""
        return self._hall_ohm_per_t * field_t

    def hall_ohms(self, fields_t: list[float], kelvins: list[float]) -> list[float]:
        """R_xy at several fields."""
        return [self._hall_ohm_per_t * field_t for field_t in fields_t]

    def longitudinal_ohms(self, fields_t: list[float], kelvins: list[float]) -> list[float]:
        """R_xx at several fields and temperatures."""
        return [self.longitudinal_ohm(b, t) for b, t in zip(fields_t, kelvins, strict=True)]

    def longitudinal_ohm(self, field_t: float, temperature_k: float) -> float:
        """R_xx, even in the field; at B = 0 the oscillations are gone."""
        b = abs(field_t)
        total = self.background_ohm(b)
        if b <= FIELD_MIN_T:
            return total
        inverse = 1.0 / b
        for amplitude, damping, dingle_k, turns, phase in self._terms:
            scaled = damping * inverse
            x = scaled * temperature_k
            exponent = x + scaled * dingle_k
            if exponent > 40.0:
                continue
            # X / sinh X = 2 X e^-X / (1 - e^-2X): no overflow, one exponential for both factors.
            factor = math.exp(-exponent)
            if x > 1e-6:
                factor *= -2.0 * x / math.expm1(-2.0 * x)
            total += amplitude * factor * math.cos(turns * inverse + phase)
        return total

    def background_ohm(self, field_t: float) -> float:
        """R_xx without its oscillations."""
        p = self.parameters
        b = abs(field_t)
        return p.resistance_ohm * (
            1.0 + p.magnetoresistance_per_t * b + p.magnetoresistance_per_t2 * b * b
        )

    def oscillation_bound(self, field_t: float) -> float:
        """Largest that all oscillations together can be at this field or below, over R0."""
        if field_t <= FIELD_MIN_T:
            return 0.0
        return (
            sum(
                abs(amplitude) * math.exp(-damping * dingle_k / field_t)
                for amplitude, damping, dingle_k, _, _ in self._terms
            )
            / self.parameters.resistance_ohm
        )

    def _clear_above_t(self) -> float:
        """Field above which the oscillations are surely worth following; a shortcut in time."""
        field_t = 1e-2
        while self.oscillation_bound(field_t) < 0.1:
            field_t *= 1.1
            if field_t > 1e3:
                return math.inf
        return field_t


def _spin(orbit: Orbit, p: int) -> float:
    if orbit.g_factor is None:
        return 1.0
    return math.cos(math.pi * p * orbit.g_factor * orbit.mass / 2)
