"""The joint fit of all sweeps of a ladder: frequency, mass, Dingle temperature of each orbit.

Every sweep has its own background; all sweeps share the orbits. The amplitudes enter linearly and
are projected out (variable projection: G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10, 413
(1973), with L. Kaufman's Jacobian, BIT 15, 49 (1975)), which leaves three parameters an orbit.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy import linalg, optimize

from orchestrator.analysis.background import background_basis, without_background
from orchestrator.analysis.sweeps import AnalysisError, ComplexArray, MovingSweep
from orchestrator.analysis.uncertainty import (
    autocovariance,
    correlation_lags,
    lag_products,
    sandwich_covariance,
)
from orchestrator.physics.landau import landau_moment
from orchestrator.physics.lifshitz_kosevich import DAMPING_T_PER_K, thermal_factor

FloatArray = npt.NDArray[np.float64]

LARGEST_MASS = 30.0
_DINGLE_RANGE = (-3.0, 30.0)  # mass times Dingle temperature; noise may carry it below 0
_SPIKE = 6.0  # robust standard deviations beyond which a sample is left out


@dataclass(frozen=True)
class OrbitStart:
    """Where the fit of one orbit begins: `frequency_t`, `mass`, and `damping_k`, which is mass
    times Dingle temperature. `harmonics` are the multiples p that the fit includes.

    One that is not `reported` is there for the others' sake: a harmonic of theirs whose damping is
    not what their own would make it."""

    frequency_t: float
    mass: float = 0.2
    damping_k: float = 0.3
    harmonics: tuple[int, ...] = (1,)
    reported: bool = True


@dataclass(frozen=True)
class LadderFit:
    """Result of the joint fit.

    Attributes
    ----------
    orbits : tuple of OrbitStart
        Fitted values, in the order given.
    linear : array, shape (orbit-harmonics, 2)
        Cosine and sine amplitudes in ohm, harmonics of each orbit in turn.
    covariance : array
        Of (linear flattened, then frequency, mass, damping of each orbit); mass rows are zero
        when the mass was held.
    mass_held : bool
        The temperatures do not differ enough; mass is 0 and damping includes temperature.
    residual : list of arrays
        What is left in each sweep, in ohm.
    """

    orbits: tuple[OrbitStart, ...]
    linear: FloatArray
    covariance: FloatArray
    mass_held: bool
    residual: list[FloatArray]


class Ladder:
    """All sweeps stacked, backgrounds projected out, weighted by their noise."""

    def __init__(self, sweeps: Sequence[MovingSweep], order: int) -> None:
        if not sweeps:
            raise AnalysisError("no sweep to analyse, allowed: one or more")
        self.order = order
        noise = [_quick_noise(sweep) for sweep in sweeps]
        self.sweeps = [s.without(_not_spikes(s, n)) for s, n in zip(sweeps, noise, strict=True)]
        self.starts = [0, *np.cumsum([s.field_t.size for s in self.sweeps]).tolist()]
        self.bases = [background_basis(s.field_t, order) for s in self.sweeps]
        self.inverse_field = np.concatenate([s.inverse_field_per_t for s in self.sweeps])
        self.temperature = np.concatenate([s.temperature_k for s in self.sweeps])
        self.noise_ohm = noise
        self.weigh(noise)
        means = [float(s.temperature_k.mean()) for s in self.sweeps]
        self.mass_held = max(means) < 1.2 * min(means)
        self.parameters_linear = len(self.sweeps) * (order + 1)
        tau = max(self.sweeps, key=lambda s: s.poles * s.time_constant_s / s.interval_s)
        self.lags = correlation_lags(tau.interval_s, tau.time_constant_s, tau.poles)

    def weigh(self, noise_ohm: Sequence[float]) -> None:
        """Weigh each sweep by its noise from here on."""
        self.noise_ohm = list(noise_ohm)
        sizes = [s.field_t.size for s in self.sweeps]
        self.weight = np.repeat(1 / np.asarray(noise_ohm), sizes)
        measured = np.concatenate([s.resistance_ohm for s in self.sweeps])
        self.target = self.project(measured * self.weight)

    def weigh_by(self, residual: Sequence[FloatArray]) -> None:
        """Weigh each sweep by what a fit left of it, in ohm.

        Differences of neighbours, with which the weights begin, hold some of a strong signal.
        """
        scatter = [math.sqrt(float(autocovariance([r], 0)[0])) for r in residual]
        old = self.noise_ohm
        self.weigh([s if s > 0 else o for s, o in zip(scatter, old, strict=True)])

    def project(self, values: FloatArray) -> FloatArray:
        """Values, shape (n,) or (n, k), without each sweep's background."""
        parts = [
            without_background(values[a:b], q)
            for a, b, q in zip(self.starts, self.starts[1:], self.bases, strict=False)
        ]
        return np.concatenate(parts)

    def split(self, values: FloatArray) -> list[FloatArray]:
        """Stacked values cut into sweeps."""
        return [values[a:b] for a, b in zip(self.starts, self.starts[1:], strict=False)]

    def response(self, frequency_t: float) -> ComplexArray:
        """The filters' response, stacked."""
        return np.concatenate([s.response(frequency_t) for s in self.sweeps])


def _quick_noise(sweep: MovingSweep) -> float:
    """Noise per sample in ohm from third differences, which a well-sampled signal hardly enters."""
    third = np.diff(sweep.resistance_ohm, 3)
    noise = float(np.median(np.abs(third))) / 0.6745 / math.sqrt(20)
    if noise > 0:
        return noise
    spread = float(np.std(third)) / math.sqrt(20)
    scale = float(np.max(np.abs(sweep.resistance_ohm)))
    if not scale > 0:
        raise AnalysisError(f'sweep "{sweep.name}": the resistance is 0 throughout')
    return max(spread, 1e-9 * scale)


def _not_spikes(sweep: MovingSweep, noise_ohm: float) -> npt.NDArray[np.bool_]:
    """False at lone samples far from both neighbours."""
    value = sweep.resistance_ohm
    middle = 0.5 * (value[:-2] + value[2:])
    away = np.abs(value[1:-1] - middle)
    limit = max(3 * _SPIKE * noise_ohm, _SPIKE * float(np.median(away)) / 0.6745)
    kept = np.ones(value.shape, dtype=np.bool_)
    # The neighbours of a spike are away as well, by half as much: only the largest goes.
    peak = away >= np.maximum(np.append(away[1:], 0.0), np.insert(away[:-1], 0, 0.0))
    kept[1:-1] = ~((away > limit) & peak)
    return kept


class _Model:
    """Columns and derivatives of the orbits at given nonlinear parameters."""

    def __init__(self, ladder: Ladder, starts: Sequence[OrbitStart]) -> None:
        self.ladder = ladder
        self.harmonics = [start.harmonics for start in starts]
        self.held = ladder.mass_held
        self.responses = [
            [ladder.response(p * start.frequency_t) for p in start.harmonics] for start in starts
        ]
        self.per_orbit = 2 if self.held else 3

    def unpack(self, values: FloatArray) -> list[tuple[float, float, float]]:
        """Frequency, mass and damping of each orbit."""
        rows = values.reshape(-1, self.per_orbit)
        return [(r[0], 0.0, r[1]) if self.held else (r[0], r[1], r[2]) for r in rows]

    def columns(self, values: FloatArray) -> list[list[ComplexArray]]:
        """Weighted complex columns: for each orbit, for each harmonic."""
        ladder, result = self.ladder, []
        x = ladder.inverse_field
        for (frequency, mass, damping), harmonics, responses in zip(
            self.unpack(values), self.harmonics, self.responses, strict=True
        ):
            wave = np.exp((2j * math.pi * frequency - DAMPING_T_PER_K * damping) * x)
            of_orbit = []
            for p, response in zip(harmonics, responses, strict=True):
                envelope = ladder.weight
                if mass > 0:
                    envelope = envelope * thermal_factor(1 / x, ladder.temperature, mass, p)
                of_orbit.append(wave**p * response * envelope)
            result.append(of_orbit)
        return result

    def derivatives(
        self, values: FloatArray, columns: list[list[ComplexArray]], linear: FloatArray
    ) -> FloatArray:
        """Derivatives of the model by the nonlinear parameters, shape (n, parameters)."""
        x, temperature = self.ladder.inverse_field, self.ladder.temperature
        result, row = [], 0
        for (_, mass, _), harmonics, of_orbit in zip(
            self.unpack(values), self.harmonics, columns, strict=True
        ):
            by_frequency = np.zeros(x.shape)
            by_mass = np.zeros(x.shape)
            by_damping = np.zeros(x.shape)
            for p, column in zip(harmonics, of_orbit, strict=True):
                c, s = linear[row]
                row += 1
                value = c * column.real + s * column.imag
                turned = s * column.real - c * column.imag
                by_frequency += 2 * math.pi * p * x * turned
                by_damping -= DAMPING_T_PER_K * p * x * value
                if mass > 0:
                    scale = DAMPING_T_PER_K * p * temperature * x
                    by_mass += value * scale * landau_moment(scale * mass)
            result += (
                [by_frequency, by_damping] if self.held else [by_frequency, by_mass, by_damping]
            )
        return np.stack(result, axis=1)


def _stack(columns: list[list[ComplexArray]]) -> FloatArray:
    parts = [part for of_orbit in columns for c in of_orbit for part in (c.real, c.imag)]
    return np.stack(parts, axis=1)


def _solve(model: _Model, values: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Residual, Kaufman's Jacobian of it, and linear amplitudes (k, 2)."""
    ladder = model.ladder
    columns = model.columns(values)
    matrix = ladder.project(_stack(columns))
    scale = np.maximum(np.sqrt(np.sum(matrix**2, axis=0)), 1e-300)
    q, r = np.linalg.qr(matrix / scale)
    along = q.T @ ladder.target
    try:
        amplitudes = linalg.solve_triangular(r, along) / scale
    except linalg.LinAlgError as error:
        raise AnalysisError("two oscillations of the fit cannot be told apart") from error
    linear = amplitudes.reshape(-1, 2)
    residual = ladder.target - q @ along
    slopes = ladder.project(model.derivatives(values, columns, linear))
    jacobian = slopes - q @ (q.T @ slopes)
    return residual, -jacobian, linear


def fit(ladder: Ladder, starts: Sequence[OrbitStart], *, evaluations: int = 60) -> LadderFit:
    """Fit all orbits to all sweeps at once.

    Parameters
    ----------
    ladder : Ladder
        The stacked sweeps.
    starts : sequence of OrbitStart
        Starting values; a frequency must be right to about half a period over the sweep.
    evaluations : int
        Most evaluations of the model.

    Returns
    -------
    LadderFit

    Raises
    ------
    AnalysisError
        If the fit does not converge, or its parameters cannot be told apart.
    """
    model = _Model(ladder, starts)
    first: list[float] = []
    low: list[float] = []
    high: list[float] = []
    for s in starts:
        first += (
            [s.frequency_t, s.damping_k] if model.held else [s.frequency_t, s.mass, s.damping_k]
        )
        low += [0.5 * s.frequency_t, *([] if model.held else [1e-4]), _DINGLE_RANGE[0]]
        high += [2 * s.frequency_t, *([] if model.held else [LARGEST_MASS]), _DINGLE_RANGE[1]]
    cache: dict[bytes, tuple[FloatArray, FloatArray, FloatArray]] = {}

    def solved(values: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        key = values.tobytes()
        if key not in cache:
            cache.clear()
            cache[key] = _solve(model, values)
        return cache[key]

    def residual(values: FloatArray) -> FloatArray:
        return solved(values)[0]

    def slopes(values: FloatArray) -> FloatArray:
        return solved(values)[1]

    found = optimize.least_squares(
        residual,
        np.clip(first, np.asarray(low) * (1 + 1e-9), np.asarray(high) * (1 - 1e-9)),
        jac=slopes,
        bounds=(low, high),
        x_scale="jac",
        ftol=1e-9,
        xtol=1e-9,
        gtol=1e-10,
        max_nfev=evaluations,
    )
    if not found.success:
        names = ", ".join(f"{s.frequency_t:.1f} T" for s in starts)
        raise AnalysisError(f"the fit of {names} did not converge in {evaluations} evaluations")
    return _finish(model, starts, np.asarray(found.x, dtype=np.float64))


def _finish(model: _Model, starts: Sequence[OrbitStart], values: FloatArray) -> LadderFit:
    """Amplitudes, covariance and residuals at the fitted parameters."""
    ladder = model.ladder
    residual, _, linear = _solve(model, values)
    columns = model.columns(values)
    jacobian = ladder.project(
        np.concatenate([_stack(columns), model.derivatives(values, columns, linear)], axis=1)
    )
    freedom = residual.size - ladder.parameters_linear - jacobian.shape[1]
    if freedom < 10:
        raise AnalysisError(
            f"{residual.size} points for {residual.size - freedom} parameters, "
            "allowed: at least 10 points more than parameters"
        )
    used = [lag_products(basis, [0, basis.shape[0]], ladder.lags) for basis in ladder.bases]
    used.append(lag_products(np.linalg.qr(jacobian)[0], ladder.starts, ladder.lags))
    noise = autocovariance(ladder.split(residual), ladder.lags, np.concatenate(used))
    try:
        covariance = sandwich_covariance(jacobian, ladder.starts, noise)
    except np.linalg.LinAlgError as error:
        raise AnalysisError(f"no uncertainty of the fit: {error}") from error
    if model.held:
        kept = list(range(2 * linear.shape[0]))
        for index in range(len(starts)):
            kept += [2 * linear.shape[0] + 3 * index, 2 * linear.shape[0] + 3 * index + 2]
        wide = np.zeros((2 * linear.shape[0] + 3 * len(starts),) * 2)
        wide[np.ix_(kept, kept)] = covariance
        covariance = wide
    orbits = tuple(
        replace(start, frequency_t=float(f), mass=float(m), damping_k=float(d))
        for (f, m, d), start in zip(model.unpack(values), starts, strict=True)
    )
    return LadderFit(orbits, linear, covariance, model.held, ladder.split(residual / ladder.weight))
