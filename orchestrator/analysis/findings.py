"""What the analysis says of an orbit, each value with its standard deviation or None."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from orchestrator.analysis.damping import LadderFit

FloatArray = npt.NDArray[np.float64]

PHASE_CONVENTION = "cos 2 pi (F/B - 1/2 + beta), amplitude positive"

_KNOWN_TO = 0.5  # a mass with a relative standard deviation above this is not reported


@dataclass(frozen=True)
class OrbitFinding:
    """One orbit. Standard deviations have the same unit as the value; None: not determinable.

    Attributes
    ----------
    frequency_t, frequency_sd_t : float
        Frequency in 1/B, in tesla.
    mass, mass_sd : float or None
        Cyclotron mass in electron masses.
    dingle_k, dingle_sd_k : float or None
        Dingle temperature in kelvin.
    amplitude_ohm, amplitude_sd_ohm : float or None
        Amplitude of the first harmonic before any damping, in ohm. None where mass and Dingle
        temperature are None, since the damping is then not known.
    beta, beta_sd : float
        Phase offset in cycles, above -1/2 and up to 1/2; see `PHASE_CONVENTION`.
    signal_to_noise : float
        First harmonic's amplitude over its standard deviation, other parameters held.
    """

    frequency_t: float
    frequency_sd_t: float
    mass: float | None
    mass_sd: float | None
    dingle_k: float | None
    dingle_sd_k: float | None
    amplitude_ohm: float | None
    amplitude_sd_ohm: float | None
    beta: float
    beta_sd: float
    signal_to_noise: float


def harmonic_significance(fit: LadderFit) -> list[dict[int, float]]:
    """For each orbit: harmonic p to the significance of its amplitude, in standard deviations.

    All nonlinear parameters are held: this asks whether there is something, not how large it was
    before damping.
    """
    count = 2 * fit.linear.shape[0]
    # Holding the nonlinear parameters: invert the covariance of all, take the linear block.
    free = np.diag(fit.covariance) > 0
    precision = np.zeros_like(fit.covariance)
    index = np.ix_(free, free)
    scale = np.sqrt(np.diag(fit.covariance)[free])
    correlation = fit.covariance[index] / np.outer(scale, scale)
    precision[index] = np.linalg.inv(correlation) / np.outer(scale, scale)
    held = np.linalg.inv(precision[:count, :count])
    result, row = [], 0
    for orbit in fit.orbits:
        of_orbit = {}
        for p in orbit.harmonics:
            pair = slice(2 * row, 2 * row + 2)
            a = fit.linear[row]
            of_orbit[p] = math.sqrt(max(float(a @ np.linalg.solve(held[pair, pair], a)), 0.0))
            row += 1
        result.append(of_orbit)
    return result


def orbit_findings(fit: LadderFit) -> list[OrbitFinding]:
    """The fit's orbits as findings, in the order of the fit, without those not reported."""
    significance = harmonic_significance(fit)
    count = 2 * fit.linear.shape[0]
    result, row = [], 0
    for number, orbit in enumerate(fit.orbits):
        pair = slice(2 * row, 2 * row + 2)
        at = count + 3 * number
        row += len(orbit.harmonics)
        if not orbit.reported:
            continue
        c, s = fit.linear[pair.start // 2]
        amplitude = math.hypot(c, s)
        spread = fit.covariance[pair, pair]
        along = np.array([c, s]) / amplitude
        across = np.array([s, -c]) / (2 * math.pi * amplitude**2)
        amplitude_sd = math.sqrt(float(along @ spread @ along))
        beta_sd = math.sqrt(float(across @ spread @ across))
        delta_cycles = math.atan2(-s, c) / (2 * math.pi)
        beta = 0.5 - (-delta_cycles) % 1.0  # cycles of delta plus 1/2, above -1/2 and up to 1/2
        mass, mass_sd, dingle, dingle_sd = _mass_and_dingle(fit, number, at)
        known = mass is not None
        result.append(
            OrbitFinding(
                frequency_t=orbit.frequency_t,
                frequency_sd_t=math.sqrt(float(fit.covariance[at, at])),
                mass=mass,
                mass_sd=mass_sd,
                dingle_k=dingle,
                dingle_sd_k=dingle_sd,
                amplitude_ohm=amplitude if known else None,
                amplitude_sd_ohm=amplitude_sd if known else None,
                beta=beta,
                beta_sd=beta_sd,
                signal_to_noise=significance[number][orbit.harmonics[0]],
            )
        )
    return result


def _mass_and_dingle(
    fit: LadderFit, number: int, at: int
) -> tuple[float | None, float | None, float | None, float | None]:
    if fit.mass_held:
        return None, None, None, None
    mass, damping = fit.orbits[number].mass, fit.orbits[number].damping_k
    block = fit.covariance[at + 1 : at + 3, at + 1 : at + 3]
    mass_sd = math.sqrt(float(block[0, 0]))
    if mass_sd > _KNOWN_TO * mass:
        return None, None, None, None
    dingle = damping / mass
    slope = np.array([-dingle / mass, 1 / mass])
    return mass, mass_sd, dingle, math.sqrt(float(slope @ block @ slope))


def strongest_first(findings: Sequence[OrbitFinding]) -> list[OrbitFinding]:
    """Findings by falling signal to noise."""
    return sorted(findings, key=lambda f: -f.signal_to_noise)
