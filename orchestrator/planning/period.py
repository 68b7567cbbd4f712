"""Ceilings of a sweep that come from the oscillation: samples per period, and the filter."""

import numpy as np

from orchestrator.config.rig import Rig
from orchestrator.config.sequence import FieldSweep
from orchestrator.physics.lifshitz_kosevich import dingle_factor, thermal_factor
from orchestrator.physics.lockin import rate_for_filter_loss
from orchestrator.planning.belief import Belief, OrbitBelief
from orchestrator.planning.ceilings import (
    Array,
    Ceiling,
    Ceilings,
    constant,
    eddy_heating,
    safety,
    with_more,
)

_DROWNED = 1e-4  # of the full amplitude: below, an orbit does not matter any more


def sweep_ceilings(
    rig: Rig, sweep: FieldSweep, belief: Belief, temperature_k: float | None
) -> Ceilings:
    """All that limits the rate of a sweep: safety first, then what the data need."""
    return with_more(
        travel_ceilings(rig),
        [
            *_period_ceilings(rig, sweep, belief, temperature_k),
            *([constant("sequence", sweep.rate_max_t_per_s)] if sweep.rate_max_t_per_s else []),
        ],
    )


def travel_ceilings(rig: Rig) -> Ceilings:
    """What limits the rate where no oscillation is measured: on the way to a field, or home."""
    return with_more(safety(rig.magnet), [eddy_heating(rig.stage)])


def lowest_visible_t(orbit: OrbitBelief, temperature_k: float | None) -> float:
    """Field in T below which an orbit is damped below 1e-4 of its full amplitude.

    Lifshitz-Kosevich: thermal factor times Dingle factor (Shoenberg 1984).
    """
    fields = np.geomspace(1e-3, 45.0, 1500)
    factor = dingle_factor(fields, orbit.dingle_k, orbit.mass)
    if temperature_k is not None:
        factor = factor * thermal_factor(fields, temperature_k, orbit.mass)
    visible = np.asarray(factor) >= _DROWNED
    return float(fields[np.argmax(visible)]) if visible.any() else float(fields[-1])


def _period_ceilings(
    rig: Rig, sweep: FieldSweep, belief: Belief, temperature_k: float | None
) -> list[Ceiling]:
    """Rates in proportion to B^2, from each orbit's lowest visible field upwards.

    The phase of an orbit is 2 pi F/B, so N samples in each period at intervals dt need a rate of
    B^2/(F N dt), whatever the field: equal steps of phase exactly.
    """
    slowest = max(rig.lock_ins, key=lambda one: one.time_constant_s * one.filter_poles)
    samples: list[tuple[float, float]] = []
    losses: list[tuple[float, float]] = []
    for orbit in belief.orbits:
        frequency = (orbit.frequency_t + orbit.frequency_sd_t) * sweep.harmonic
        from_t = lowest_visible_t(orbit, temperature_k)
        per_sample = 1 / (frequency * sweep.samples_per_period * rig.sampling.interval_s)
        samples.append((from_t, per_sample))
        filtered = rate_for_filter_loss(
            1.0, frequency, slowest.time_constant_s, slowest.filter_poles, sweep.filter_loss
        )
        losses.append((from_t, float(filtered)))
    return [_squared("samples per period", samples), _squared("filter loss", losses)]


def _squared(name: str, orbits: list[tuple[float, float]]) -> Ceiling:
    """The lowest of several c B^2, each from its own lowest visible field upwards."""
    lowest = min(from_t for from_t, _ in orbits)

    def rate(size: Array) -> Array:
        # Below every orbit's visible field the rate is that of the field where the first appears.
        held = np.maximum(size, lowest)
        rates = [np.where(held >= from_t, c * held**2, np.inf) for from_t, c in orbits]
        return np.asarray(np.min(rates, axis=0))

    edges = sorted({from_t for from_t, _ in orbits})
    return Ceiling(name, rate, tuple(float(np.nextafter(edge, 0.0)) for edge in edges))
