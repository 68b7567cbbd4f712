"""Simulated sweeps through a filter worked out in the time domain, apart from the analysis."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import constants, signal

from orchestrator.analysis.sweeps import Sweep

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class TrueOrbit:
    """One orbit of the sample: amplitude in ohm before damping, beta in cycles."""

    frequency_t: float
    mass: float
    dingle_k: float
    amplitude_ohm: float = 1.0
    beta: float = 0.0
    harmonics: int = 2


LIGHT = TrueOrbit(410.0, 0.19, 1.3, 1.0, 0.1)
HEAVY = TrueOrbit(1130.0, 0.42, 0.7, 1.0, -0.2)


def fields(low_t: float, high_t: float, frequency_t: float, largest_step_t: float) -> FloatArray:
    """Rising fields, one a second, 9 to a period of this frequency unless the magnet is slower."""
    field = [low_t]
    while field[-1] < high_t:
        field.append(field[-1] + min(field[-1] ** 2 / (9 * frequency_t), largest_step_t))
    return np.asarray(field)


def resistance_ohm(
    field_t: FloatArray, temperature_k: float, orbits: tuple[TrueOrbit, ...]
) -> FloatArray:
    """100 ohm with a smooth magnetoresistance, and the oscillations, written from the formula."""
    field = np.abs(field_t)
    total = 100 * (1 + 0.01 * field + 0.001 * field**2)
    unit = 2 * np.pi**2 * constants.k * constants.m_e / (constants.hbar * constants.e)
    for orbit in orbits:
        for p in range(1, orbit.harmonics + 1):
            scale = unit * p * orbit.mass / field
            x = scale * temperature_k
            size = orbit.amplitude_ohm / np.sqrt(p) * np.exp(-scale * orbit.dingle_k)
            phase = 2 * np.pi * p * (orbit.frequency_t / field - 0.5 + orbit.beta)
            total += size * x / np.sinh(x) * np.cos(phase)
    return np.asarray(total)


def simulated_sweep(
    random: np.random.Generator,
    field_t: FloatArray,
    temperature_k: float,
    orbits: tuple[TrueOrbit, ...],
    *,
    noise_ohm: float = 0.05,
    time_constant_s: float = 0.3,
    poles: int = 4,
    substeps: int = 20,
) -> Sweep:
    """One sweep, a sample a second: signal and white noise through n RC poles, step by step.

    Parameters
    ----------
    field_t : array
        Field at each second.
    noise_ohm : float
        Standard deviation of a sample's noise behind the filter.
    """
    time = np.arange(field_t.size, dtype=np.float64)
    before = 12 * substeps
    fine_time = np.arange(-before, (field_t.size - 1) * substeps + 1) / substeps
    fine_field = np.interp(fine_time, time, field_t)
    values = resistance_ohm(fine_field, temperature_k, orbits)
    if time_constant_s > 0:
        # Bilinear RC poles at the fine step; the noise is scaled by the impulse response's energy.
        b, a = signal.bilinear([1.0], [time_constant_s, 1.0], fs=substeps)
        impulse = np.zeros(int(80 * time_constant_s * substeps) + 10)
        impulse[0] = 1.0
        for _ in range(poles):
            impulse = signal.lfilter(b, a, impulse)
        white = random.normal(size=values.size) * noise_ohm / np.sqrt(np.sum(impulse**2))
        start = values[0]
        values = values - start + white
        for _ in range(poles):
            values = signal.lfilter(b, a, values)
        values = values + start
    else:
        values = values + noise_ohm * random.normal(size=values.size)
    return Sweep(
        name=f"{temperature_k:g} K",
        direction=1 if field_t[-1] > field_t[0] else -1,
        time_s=time,
        field_t=field_t,
        temperature_k=temperature_k * (1 + 1e-4 * random.normal(size=time.size)),
        resistance_ohm=values[before::substeps],
        time_constant_s=time_constant_s,
        poles=poles,
    )


def simulated_ladder(
    seed: int,
    field_t: FloatArray,
    temperatures_k: tuple[float, ...],
    orbits: tuple[TrueOrbit, ...],
    **options: float,
) -> list[Sweep]:
    """Sweeps at several temperatures, up and down in turn."""
    random = np.random.default_rng(seed)
    return [
        simulated_sweep(
            random,
            field_t if number % 2 == 0 else field_t[::-1],
            temperature_k,
            orbits,
            **options,  # type: ignore[arg-type]
        )
        for number, temperature_k in enumerate(temperatures_k)
    ]
