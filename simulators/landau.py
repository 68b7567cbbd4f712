"""A two-dimensional electron gas from its Landau levels, at constant density.

Levels E_n = hbar w_c (n + 1/2), each with g e B/h states per area, broadened to Gaussians of width
Gamma = sqrt(hbar w_c k T_D), which damps the first harmonic as Dingle's factor does. With
a_p = exp(-2 pi^2 p^2 Gamma^2/(hbar w_c)^2), X_p = 2 pi^2 p k T/(hbar w_c), u = mu/(hbar w_c),
Poisson's sum over the levels gives

    density:  n h/(g e B) = u + sum_p (-1)^p a_p (X_p/sinh X_p) sin(2 pi p u)/(pi p),
    states:   D/D0 = 1 + 2 sum_p (-1)^p a_p cos(2 pi p E/(hbar w_c)),

the first solved for the chemical potential at each field and temperature.

rho_xx = rho_0 <(D/D0)^2>, averaged over the Fermi edge: for small oscillations it is
4 R_T R_D cos(2 pi F/B - pi) (Coleridge, Stoner & Fletcher 1989). rho_xy = 1/sigma_xy, with sigma_xy
g e^2/h times the levels whose extended states are filled: a share s of the width about the centre,
s^2 + (1 - s^2) (1 - a_1)^2 of its square, so that levels which overlap are extended throughout.
Where the rest is localised there are plateaus of h/(e^2 nu).

Not for a chemical potential near the lowest level's tail (F/B below 0.5) or near the band's edge
(Gamma or k T not small against it). Localised states count in rho_xx, so that its minima at integer
filling are narrower than real ones.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import constants
from scipy.interpolate import RectBivariateSpline
from scipy.special import expit

Array = NDArray[np.float64]

_MOST_HARMONICS = 400
_GONE = 32.0  # exp(-32): a harmonic damped so far is left out
_POINTS_A_PERIOD = 24  # at least
_POINTS_A_WIDTH = 5  # of a level's extended states
_TEMPERATURES = 40
_UNSEEN = 1e-5
_CHUNK = 256


@dataclass(frozen=True, slots=True)
class GasParameters:
    """The gas.

    Attributes
    ----------
    density_m2 : float
        Electrons per area, constant.
    mass : float
        Effective mass, multiples of the electron mass.
    dingle_k : float
        T_D = hbar/(2 pi k tau_q), the width of the levels.
    resistance_ohm : float
        rho_0 of a square.
    degeneracy : int
        States per level and flux quantum: spin times valley.
    extended_share : float
        Width of a level's extended states over its whole width.
    field_max_t, coldest_k, hottest_k : float
        Where it is worked out; beyond, the edge's value holds.
    """

    density_m2: float
    mass: float
    dingle_k: float
    resistance_ohm: float
    degeneracy: int = 2
    extended_share: float = 0.2
    field_max_t: float = 12.0
    coldest_k: float = 0.05
    hottest_k: float = 30.0

    @property
    def frequency_t(self) -> float:
        """F = n h/(g e): Onsager's relation with the density of a level."""
        return self.density_m2 * constants.h / (self.degeneracy * constants.e)


class Gas:
    """The formulas, for arrays of field (T, above 0) and temperature (K) of one shape."""

    def __init__(self, parameters: GasParameters) -> None:
        p = parameters
        self.parameters = p
        # k/(hbar w_c) at 1 T, per kelvin: multiples of a kelvin and 1/T.
        self._k_per_spacing = constants.k * p.mass * constants.m_e / (constants.hbar * constants.e)

    def spacing_k(self, field_t: Array) -> Array:
        """hbar w_c / k."""
        return field_t / self._k_per_spacing

    def _harmonics(self, field_t: Array, width: Array | float) -> Array:
        """Amplitudes (-1)^p a_p on a last axis p = 1, 2, ...; ``width`` scales Gamma."""
        ratio = self.parameters.dingle_k / self.spacing_k(field_t) * width**2
        least = max(float(ratio.min()), 1e-9)
        count = min(_MOST_HARMONICS, 1 + int(math.sqrt(_GONE / (2 * math.pi**2 * least))))
        p = np.arange(1, count + 1)
        damped = np.exp(-2 * math.pi**2 * p**2 * ratio[..., None])
        return np.asarray(np.where(p % 2, -damped, damped))

    def _thermal(self, field_t: Array, temperature_k: Array, count: int) -> Array:
        """X/sinh X on a last axis p = 1 ... count."""
        x = 2 * math.pi**2 * (temperature_k / self.spacing_k(field_t))[..., None]
        x = np.maximum(x * np.arange(1, count + 1), 1e-9)
        return np.asarray(-2 * x * np.exp(-x) / np.expm1(-2 * x))

    def chemical_potential_k(self, field_t: Array, temperature_k: Array) -> Array:
        """mu/k at constant density."""
        return self._level(field_t, temperature_k) * self.spacing_k(field_t)

    def _level(self, field_t: Array, temperature_k: Array) -> Array:
        """mu over hbar w_c, by Newton's method kept inside a bracket; the density rises with it."""
        filling = self.parameters.frequency_t / field_t
        t = temperature_k / self.spacing_k(field_t)
        wave = self._harmonics(field_t, 1.0)
        wave = wave * self._thermal(field_t, temperature_k, wave.shape[-1])
        p = np.arange(1, wave.shape[-1] + 1)
        low, high = filling - 1.0 - 2 * t, filling + 1.0
        u = filling.copy()
        for _ in range(60):
            turn = 2 * math.pi * p * u[..., None]
            smooth = t * np.logaddexp(0.0, u / t)
            excess = smooth + np.sum(wave * np.sin(turn) / (math.pi * p), axis=-1) - filling
            low, high = np.where(excess < 0, u, low), np.where(excess < 0, high, u)
            slope = expit(u / t) + 2 * np.sum(wave * np.cos(turn), axis=-1)
            step = np.divide(excess, slope, out=np.full_like(u, np.inf), where=slope > 1e-6)
            newton = u - step
            inside = (newton > low) & (newton < high)
            following = np.where(inside, newton, 0.5 * (low + high))
            if np.max(np.abs(following - u)) < 1e-11:
                return np.asarray(following)
            u = following
        return np.asarray(u)

    def resistivity_ohm(self, field_t: Array, temperature_k: Array) -> tuple[Array, Array]:
        """rho_xx and rho_xy of a square, ohm."""
        u = self._level(field_t, temperature_k)
        return self._xx_ohm(field_t, temperature_k, u), self._xy_ohm(field_t, temperature_k, u)

    def _xx_ohm(self, field_t: Array, temperature_k: Array, u: Array) -> Array:
        wave = self._harmonics(field_t, 1.0)
        count = wave.shape[-1]
        series = np.concatenate([wave[..., ::-1], np.ones((*u.shape, 1)), wave], axis=-1)
        size = 1 << (4 * count + 1).bit_length()
        # The square of a Fourier series: its coefficients convolved with themselves.
        square = np.fft.irfft(np.fft.rfft(series, size, axis=-1) ** 2, size, axis=-1)
        square = square[..., 2 * count : 4 * count + 1]
        thermal = self._thermal(field_t, temperature_k, 2 * count)
        turn = 2 * math.pi * np.arange(1, 2 * count + 1) * u[..., None]
        mean = square[..., 0] + 2 * np.sum(square[..., 1:] * thermal * np.cos(turn), axis=-1)
        return np.asarray(self.parameters.resistance_ohm * mean)

    def _extended(self, field_t: Array) -> Array:
        """Width of the extended states over the levels': the share, or all if they overlap."""
        apart = np.exp(-2 * math.pi**2 * self.parameters.dingle_k / self.spacing_k(field_t))
        share = self.parameters.extended_share**2
        return np.asarray(np.sqrt(share + (1 - share) * (1 - apart) ** 2))

    def extended_width(self, field_t: Array, temperature_k: float) -> Array:
        """Width of a step of the Hall resistance over the spacing of the levels."""
        level = self._extended(field_t) * np.sqrt(
            self.parameters.dingle_k / self.spacing_k(field_t)
        )
        return np.asarray(np.hypot(level, 2 * temperature_k / self.spacing_k(field_t)))

    def _xy_ohm(self, field_t: Array, temperature_k: Array, u: Array) -> Array:
        p = self.parameters
        wave = self._harmonics(field_t, self._extended(field_t))
        wave = wave * self._thermal(field_t, temperature_k, wave.shape[-1])
        order = np.arange(1, wave.shape[-1] + 1)
        t = temperature_k / self.spacing_k(field_t)
        turn = 2 * math.pi * order * u[..., None]
        smooth = t * np.logaddexp(0.0, u / t)
        filled = smooth + np.sum(wave * np.sin(turn) / (math.pi * order), axis=-1)
        return np.asarray(constants.h / (p.degeneracy * constants.e**2 * filled))


class GasTable:
    """The gas made ready for fast evaluation: splines in 1/B and the logarithm of T."""

    def __init__(self, parameters: GasParameters) -> None:
        p = parameters
        self.parameters = p
        gas = Gas(p)
        # Where the coldest oscillation is unseen, the gas is classical.
        damping = 2 * math.pi**2 * p.dingle_k * gas._k_per_spacing
        self.lowest_t = min(0.5 * p.field_max_t, damping / math.log(4 / _UNSEEN))
        self.damping_t = damping
        self._inverse = self._points(gas)
        self._log_k = np.linspace(math.log(p.coldest_k), math.log(p.hottest_k), _TEMPERATURES)
        field_t = 1 / self._inverse
        xx, scale = [], []
        for kelvin in np.exp(self._log_k):
            parts = [
                gas.resistivity_ohm(part, np.full_like(part, kelvin))
                for part in np.split(field_t, range(_CHUNK, field_t.size, _CHUNK))
            ]
            xx.append(np.concatenate([one for one, _ in parts]))
            hall = np.concatenate([one for _, one in parts])
            scale.append(hall * p.density_m2 * constants.e / field_t)  # 1 where classical
        self._xx = RectBivariateSpline(self._inverse, self._log_k, np.array(xx).T)
        self._xy = RectBivariateSpline(self._inverse, self._log_k, np.array(scale).T)

    def _points(self, gas: Gas) -> Array:
        """Values of 1/B that are close together where levels are sharp."""
        p = self.parameters
        fine = np.linspace(1 / p.field_max_t, 1 / self.lowest_t, 20_001)
        width = gas.extended_width(1 / fine, p.coldest_k)
        each = np.maximum(_POINTS_A_PERIOD, _POINTS_A_WIDTH / width) * p.frequency_t
        steps = 0.5 * (each[1:] + each[:-1]) * np.diff(fine)
        count = np.concatenate([[0.0], np.cumsum(steps)])
        number = max(50, int(count[-1]))
        return np.asarray(np.interp(np.linspace(0.0, count[-1], number), count, fine))

    def longitudinal_ohms(self, field_t: Array, temperature_k: Array) -> Array:
        """rho_xx, even in the field."""
        size = np.abs(field_t)
        seen = size > self.lowest_t
        ohms = np.full(size.shape, self.parameters.resistance_ohm)
        if seen.any():
            ohms[seen] = self._xx.ev(*self._place(size[seen], temperature_k[seen]))
        return ohms

    def hall_ohms(self, field_t: Array, temperature_k: Array) -> Array:
        """rho_xy, odd in the field."""
        size = np.abs(field_t)
        ohms = field_t / (self.parameters.density_m2 * constants.e)
        seen = size > self.lowest_t
        if seen.any():
            ohms[seen] *= self._xy.ev(*self._place(size[seen], temperature_k[seen]))
        return np.asarray(ohms)

    def _place(self, size_t: Array, temperature_k: Array) -> tuple[Array, Array]:
        p = self.parameters
        inverse = 1 / np.minimum(size_t, p.field_max_t)
        return inverse, np.log(np.clip(temperature_k, p.coldest_k, p.hottest_k))
