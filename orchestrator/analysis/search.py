"""Finding orbits of which nothing is known: matched spectra of all sweeps together.

A sine in 1/B under several typical dampings is correlated with the residuals of all sweeps at once.
The strongest peak above the noise is fitted with its harmonics and taken away, and the search goes
on, until what is left could be noise.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from orchestrator.analysis import damping, findings
from orchestrator.analysis.damping import Ladder, LadderFit, OrbitStart
from orchestrator.analysis.spectrum import (
    false_alarm,
    fourier_sum,
    noise_floor,
    ratio_for_false_alarm,
)
from orchestrator.analysis.sweeps import AnalysisError
from orchestrator.physics.lifshitz_kosevich import DAMPING_T_PER_K, thermal_factor

FloatArray = npt.NDArray[np.float64]

FALSE_ALARM = 1e-3
"""Largest probability that a reported orbit is noise, for a search that knows nothing."""

FALSE_ALARM_KNOWN = 1e-2
"""The same within 15 percent of a frequency that was expected."""

_KNOWN_PART = 0.15
_OVERSAMPLING = 6
_MOST_FREQUENCIES = 150_000
_TRIALS_PER_BIN = 12.0
# The maximum between bins counts as sqrt(power) times the bins (R. V. Baluev, Mon. Not. R. Astron.
# Soc. 385, 1279 (2008)), about 4; the templates together as about three independent searches.
_LEAST_PERIODS = 5.0
_HARMONICS = (1, 2, 3)
_HIGHEST_HARMONIC = 5  # up to this multiple, a peak is taken for a harmonic
_LOOK_FOR_HARMONICS = 20.0  # standard deviations of the first above which others may be seen
_KEEP_HARMONIC = 4.0  # standard deviations above which a harmonic is kept in the fit
# Mass, and mass times Dingle temperature, of the dampings tried.
_TEMPLATES = ((0.0, 0.0), (0.1, 0.1), (0.2, 0.3), (0.4, 0.3), (0.8, 0.6), (1.6, 1.0))


@dataclass(frozen=True)
class Peak:
    """A peak of the matched spectrum: `ratio` is its power over the noise floor."""

    frequency_t: float
    ratio: float
    false_alarm: float


@dataclass(frozen=True)
class Span:
    """Frequencies that the sweeps can show, and how close two of them may lie, in tesla."""

    lowest_t: float
    highest_t: float
    resolution_t: float


def frequency_span(ladder: Ladder) -> Span:
    """Limits of the search from the sampling and the range of 1/B."""
    x = ladder.inverse_field
    low, high = np.quantile(x, [0.03, 0.97])
    length = max(float(high - low), 1e-12)
    steps = np.concatenate([np.abs(np.diff(s.inverse_field_per_t)) for s in ladder.sweeps])
    steps = steps[steps > 0]
    if steps.size == 0:
        raise AnalysisError("the field does not move in any sweep")
    highest = 0.5 / float(np.median(steps))
    whole = float(x.max() - x.min())
    highest = min(highest, _MOST_FREQUENCIES / (_OVERSAMPLING * whole))
    return Span(_LEAST_PERIODS / length, highest, 1 / length)


def _template(ladder: Ladder, mass: float, damping_k: float) -> FloatArray:
    x = ladder.inverse_field
    envelope = np.exp(-DAMPING_T_PER_K * damping_k * (x - x.min()))
    if mass > 0:
        envelope = envelope * thermal_factor(1 / x, ladder.temperature, mass)
    return np.asarray(envelope * ladder.weight, dtype=np.float64)


def matched_spectra(
    ladder: Ladder, residual: FloatArray, span: Span
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Power over noise floor, power over noise variance, and the frequencies in tesla.

    Each is the largest of the templates, shape (frequencies,).

    Parameters
    ----------
    ladder : Ladder
        The stacked sweeps.
    residual : array, shape (n,)
        Weighted residual with the backgrounds projected out.
    span : Span
        Limits of the search.
    """
    x = ladder.inverse_field
    step = 1 / (_OVERSAMPLING * float(x.max() - x.min()))
    first = max(1, math.floor(0.5 * span.lowest_t / step))
    count = math.ceil(span.highest_t / step)
    if count - first < 10 * _OVERSAMPLING:
        raise AnalysisError(
            f"the sweeps show frequencies from {span.lowest_t:.4g} T to {span.highest_t:.4g} T "
            "only, allowed: a range of 1/B and a sampling that leave room for oscillations"
        )
    # One template at a time has a transform of its own; the floors follow each one's noise.
    ratio, strength = np.zeros(count - first), np.zeros(count - first)
    for mass, damping_k in _TEMPLATES:
        envelope = _template(ladder, mass, damping_k)
        norm = math.sqrt(float(envelope @ envelope))
        if not norm > 0:
            continue
        power = np.abs(fourier_sum(x, residual * envelope / norm, step, count))[first:] ** 2
        width = _OVERSAMPLING * _independence(x, envelope)
        floor = np.maximum(noise_floor(power, int(25 * width)), 1e-300)
        ratio, strength = np.maximum(ratio, power / floor), np.maximum(strength, power)
    return ratio, strength, np.asarray(step * np.arange(first, count), dtype=np.float64)


def _independence(x: FloatArray, envelope: FloatArray) -> float:
    """How many times wider a peak is under this envelope than without any."""
    power = envelope**2
    mean = float(power @ x) / float(power.sum())
    spread = math.sqrt(float(power @ (x - mean) ** 2) / float(power.sum()))
    return max(1.0, float(x.max() - x.min()) / (math.sqrt(12) * max(spread, 1e-12)))


def strongest_peak(
    ladder: Ladder,
    residual: FloatArray,
    span: Span,
    avoided: Sequence[float],
    known: Sequence[float],
) -> Peak | None:
    """The strongest peak that noise would not show, or None.

    Parameters
    ----------
    avoided : sequence of float
        Frequencies around which what is left of an orbit is no new one.
    known : sequence of float
        Expected frequencies; near them a weaker peak is enough.
    """
    ratio, strength, frequency = matched_spectra(ladder, residual, span)
    allowed = frequency >= span.lowest_t
    for each in avoided:
        allowed &= np.abs(frequency - each) > 2.0 * span.resolution_t
    near = np.zeros(frequency.shape, dtype=np.bool_)
    for each in known:
        near |= np.abs(frequency - each) < _KNOWN_PART * each
    independent = ratio.size / _OVERSAMPLING
    floor_bins = max(25.0, 0.2 * independent)
    for candidates, limit in ((allowed, FALSE_ALARM), (allowed & near, FALSE_ALARM_KNOWN)):
        trials = _TRIALS_PER_BIN * max(1.0, float(candidates.sum()) / _OVERSAMPLING)
        seen = candidates & (ratio > ratio_for_false_alarm(limit, trials, floor_bins))
        if seen.any():
            # Of all that is seen, the strongest: the floor under it may be its own side lobes.
            at = int(np.argmax(np.where(seen, strength, 0.0)))
            chance = false_alarm(float(ratio[at]), trials, floor_bins)
            return Peak(_vertex(frequency, strength, at), float(ratio[at]), chance)
    return None


def _vertex(frequency: FloatArray, power: FloatArray, at: int) -> float:
    """Maximum of the parabola through a peak's three highest points."""
    if not 0 < at < power.size - 1:
        return float(frequency[at])
    left, middle, right = power[at - 1 : at + 2]
    bend = left - 2 * middle + right
    shift = 0.5 * (left - right) / bend if bend < 0 else 0.0
    return float(frequency[at] + np.clip(shift, -0.5, 0.5) * (frequency[1] - frequency[0]))


def start_of(ladder: Ladder, residual: FloatArray, frequency_t: float) -> OrbitStart:
    """Starting mass and damping by a grid search on the demodulated, block-averaged residual.

    `residual` is weighted, without background and other orbits; `frequency_t` may be off by about
    the resolution, and is improved.
    """
    x = ladder.inverse_field
    turned = residual * np.exp(-2j * math.pi * frequency_t * x) * ladder.weight
    loss = np.conj(ladder.response(frequency_t))
    means = _block_means(ladder, x, frequency_t)
    block, count = means

    def mean(values: FloatArray) -> FloatArray:
        return np.asarray(np.bincount(block, values) / count)

    signal = np.bincount(block, (turned * loss).real) + 1j * np.bincount(
        block, (turned * loss).imag
    )
    strength = np.bincount(block, (np.abs(loss) * ladder.weight) ** 2)
    inverse, temperature = mean(x), mean(ladder.temperature)
    length = float(np.ptp(inverse)) or 1.0
    shifts = np.linspace(-0.6, 0.6, 13) / length
    waves = np.exp(-2j * math.pi * shifts[:, None] * inverse)
    best, start = -1.0, OrbitStart(frequency_t)
    masses = [0.0] if ladder.mass_held else list(np.geomspace(0.02, 4.0, 18))
    for mass in masses:
        thermal = thermal_factor(1 / inverse, temperature, mass)
        for damping_k in (0.02, 0.06, 0.12, 0.2, 0.3, 0.45, 0.7, 1.1, 1.8, 3.0):
            envelope = thermal * np.exp(-DAMPING_T_PER_K * damping_k * (inverse - inverse.min()))
            norm = float(envelope**2 @ strength)
            if not norm > 0:
                continue
            explained = np.abs(waves @ (envelope * signal)) ** 2 / norm
            at = int(np.argmax(explained))
            if explained[at] > best:
                best = float(explained[at])
                start = OrbitStart(frequency_t + float(shifts[at]), mass, damping_k)
    return start


def _block_means(
    ladder: Ladder, x: FloatArray, frequency_t: float
) -> tuple[npt.NDArray[np.int64], FloatArray]:
    """Block number of each sample, and samples per block: 30 blocks of 1/B in each sweep."""
    low, high = float(x.min()), float(x.max())
    part = np.minimum((30 * (x - low) / (high - low)).astype(np.int64), 29)
    sizes = [b - a for a, b in zip(ladder.starts, ladder.starts[1:], strict=False)]
    part = part + 30 * np.repeat(np.arange(len(sizes)), sizes)
    _, block = np.unique(part, return_inverse=True)
    return block.astype(np.int64), np.bincount(block).astype(np.float64)


def with_harmonics(starts: Sequence[OrbitStart], span: Span) -> list[OrbitStart]:
    """Starts with harmonics 1 to 3, save those that fall on another orbit or cannot be seen."""
    result = []
    for start in starts:
        kept = [1]
        for p in _HARMONICS[1:]:
            at = p * start.frequency_t
            clear = all(
                abs(at - q * other.frequency_t) > 3 * span.resolution_t
                for other in starts
                if other is not start
                for q in (1, 2)
            )
            if clear and at < span.highest_t:
                kept.append(p)
        result.append(replace(start, harmonics=tuple(kept)))
    return result


def fit_with_harmonics(ladder: Ladder, starts: Sequence[OrbitStart], span: Span) -> LadderFit:
    """Fit the starts as they are, then with those further harmonics that are seen.

    Raises
    ------
    AnalysisError
        If the fit fails.
    """
    basic = damping.fit(ladder, starts)
    strong = [s[1] > _LOOK_FOR_HARMONICS for s in findings.harmonic_significance(basic)]
    wide = [
        full if look else orbit
        for orbit, full, look in zip(
            basic.orbits, with_harmonics(basic.orbits, span), strong, strict=True
        )
    ]
    if all(w.harmonics == o.harmonics for w, o in zip(wide, basic.orbits, strict=True)):
        return basic
    try:
        full_fit = damping.fit(ladder, wide)
    except AnalysisError:
        return basic
    seen = findings.harmonic_significance(full_fit)
    kept = [
        replace(o, harmonics=tuple(p for p in o.harmonics if p == 1 or s[p] > _KEEP_HARMONIC))
        for o, s in zip(full_fit.orbits, seen, strict=True)
    ]
    if [k.harmonics for k in kept] == [o.harmonics for o in full_fit.orbits]:
        return full_fit
    return damping.fit(ladder, kept)


def search(ladder: Ladder, *, count_max: int = 4, known: Sequence[float] = ()) -> LadderFit | None:
    """Find orbits one after another, each fitted jointly with those before.

    Returns
    -------
    LadderFit or None
        The joint fit of all that was found; None if there is nothing above the noise.
    """
    span = frequency_span(ladder)
    residual = ladder.target
    fitted: LadderFit | None = None
    refused: list[float] = []
    for _ in range(count_max + 4):
        orbits = list(fitted.orbits) if fitted is not None else []
        if sum(o.reported for o in orbits) >= count_max:
            break
        avoided = [*(o.frequency_t for o in orbits), *refused]
        peak = strongest_peak(ladder, residual, span, avoided, known)
        if peak is None:
            break
        attempt = _joined(ladder, orbits, start_of(ladder, residual, peak.frequency_t), span, known)
        if attempt is None or not _stands(attempt, peak, span, avoided):
            refused.append(peak.frequency_t)
            continue
        fitted = attempt
        ladder.weigh_by(fitted.residual)
        residual = np.concatenate(fitted.residual) * ladder.weight
    return refined(ladder, fitted) if fitted is not None else None


def refined(ladder: Ladder, fitted: LadderFit) -> LadderFit:
    """The same fit once more, each sweep weighted by its own noise as the fit left it.

    Raises
    ------
    AnalysisError
        If the fit fails.
    """
    ladder.weigh_by(fitted.residual)
    return damping.fit(ladder, fitted.orbits)


def _joined(
    ladder: Ladder,
    orbits: Sequence[OrbitStart],
    start: OrbitStart,
    span: Span,
    known: Sequence[float],
) -> LadderFit | None:
    """Fit of the orbits so far and one more; None if it fails.

    What was taken for an orbit and turns out to be a harmonic of the new one is dropped; a new one
    that is a harmonic of another, with a damping of its own, is fitted but not reported.
    """

    def harmonic(frequency_t: float, of: OrbitStart) -> bool:
        multiples = [p * of.frequency_t for p in range(2, _HIGHEST_HARMONIC + 1)]
        return any(
            abs(frequency_t - m) < 2 * span.resolution_t and not _is_known(m, [of], known)
            for m in multiples
        )

    others = [o for o in orbits if not harmonic(o.frequency_t, start)]
    alone = not any(harmonic(start.frequency_t, o) for o in orbits if o.reported)
    try:
        return fit_with_harmonics(ladder, [*others, replace(start, reported=alone)], span)
    except AnalysisError:
        return None


def _is_known(frequency_t: float, orbits: Sequence[OrbitStart], known: Sequence[float]) -> bool:
    """Whether a multiple of an orbit was expected as an orbit of its own."""
    return any(
        abs(frequency_t - k) < _KNOWN_PART * k
        and not any(abs(o.frequency_t - k) < _KNOWN_PART * k for o in orbits)
        for k in known
    )


def _stands(attempt: LadderFit, peak: Peak, span: Span, avoided: Sequence[float]) -> bool:
    """Whether the newest orbit of a fit is where its peak was, no other's side lobe, and seen."""
    orbit = attempt.orbits[-1]
    significance = findings.harmonic_significance(attempt)[-1][1]
    others = [*(o.frequency_t for o in attempt.orbits[:-1]), *avoided]
    return (
        abs(orbit.frequency_t - peak.frequency_t) < 3 * span.resolution_t
        and all(abs(orbit.frequency_t - f) > span.resolution_t for f in others)
        and significance > 4.0
    )
