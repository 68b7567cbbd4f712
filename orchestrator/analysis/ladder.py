"""The analysis of a ladder: find the orbits, fit them, say what they are."""

from collections.abc import Sequence

import numpy as np

from orchestrator.analysis import damping, search
from orchestrator.analysis.background import BACKGROUND_ORDER
from orchestrator.analysis.damping import Ladder, OrbitStart
from orchestrator.analysis.findings import OrbitFinding, orbit_findings
from orchestrator.analysis.sweeps import AnalysisError, Sweep


def stack(sweeps: Sequence[Sweep], background_order: int = BACKGROUND_ORDER) -> Ladder:
    """Sweeps with lag put right, stacked for the fit.

    Raises
    ------
    AnalysisError
        If a sweep cannot be analysed; the message says which and why.
    """
    return Ladder([sweep.lag_corrected() for sweep in sweeps], background_order)


def find_orbits(
    sweeps: Sequence[Sweep], *, count_max: int = 4, known: Sequence[float] = ()
) -> list[float]:
    """Frequencies of the orbits that the sweeps show, in tesla, from low to high.

    Parameters
    ----------
    sweeps : sequence of Sweep
        All sweeps of one sample.
    count_max : int
        Most orbits looked for.
    known : sequence of float
        Frequencies expected to about 15 percent. They only lower the threshold near them; nothing
        is reported that the data do not show.

    Returns
    -------
    list of float
        Empty if nothing stands above the noise with a false alarm below 1e-3. Harmonics of an
        orbit are not reported.

    Raises
    ------
    AnalysisError
        If a sweep cannot be analysed.
    """
    fitted = search.search(stack(sweeps), count_max=count_max, known=known)
    if fitted is None:
        return []
    return sorted(o.frequency_t for o in fitted.orbits if o.reported)


def fit_ladder(sweeps: Sequence[Sweep], frequencies_t: Sequence[float]) -> list[OrbitFinding]:
    """Fit orbits of given frequencies to all sweeps at once.

    Parameters
    ----------
    sweeps : sequence of Sweep
        All sweeps of one sample.
    frequencies_t : sequence of float
        Frequencies in tesla, right to about half a period over the sweep, as `find_orbits` gives.

    Returns
    -------
    list of OrbitFinding
        In the order of the frequencies.

    Raises
    ------
    AnalysisError
        If a sweep cannot be analysed, a frequency is not positive, or the fit fails.
    """
    for each in frequencies_t:
        if not (np.isfinite(each) and each > 0):
            raise AnalysisError(f"frequency: {each!r} T, allowed: above 0 T")
    if not frequencies_t:
        return []
    ladder = stack(sweeps)
    span = search.frequency_span(ladder)
    starts: list[OrbitStart] = []
    residual = ladder.target
    for each in frequencies_t:
        starts.append(search.start_of(ladder, residual, each))
        fitted = damping.fit(ladder, starts)
        starts = list(fitted.orbits)
        residual = np.concatenate(fitted.residual) * ladder.weight
    fitted = search.fit_with_harmonics(ladder, starts, span)
    return orbit_findings(search.refined(ladder, fitted))


def analyse_ladder(
    sweeps: Sequence[Sweep], *, count_max: int = 4, known: Sequence[float] = ()
) -> list[OrbitFinding]:
    """Find and fit all orbits, from low to high frequency; see `find_orbits` and `fit_ladder`.

    What the fit says grows towards low field, by more than four standard deviations, is left out.

    Raises
    ------
    AnalysisError
        If a sweep cannot be analysed.
    """
    fitted = search.search(stack(sweeps), count_max=count_max, known=known)
    if fitted is None:
        return []
    found = sorted(orbit_findings(fitted), key=lambda f: f.frequency_t)
    return [one for one in found if not _grows_towards_low_field(one)]


def _grows_towards_low_field(finding: OrbitFinding) -> bool:
    """Whether a Dingle temperature lies clearly below zero.

    No orbit does that; a rest of the background or an alias of the sampling may.
    """
    if finding.dingle_k is None or finding.dingle_sd_k is None:
        return False
    return finding.dingle_k < -4 * finding.dingle_sd_k


def analyse_directions(
    sweeps: Sequence[Sweep], frequencies_t: Sequence[float]
) -> dict[int, list[OrbitFinding]]:
    """The fit of rising (+1) and of falling (-1) sweeps apart; a lag left over shows between them.

    Returns
    -------
    dict
        Direction to findings; a direction without sweeps is absent.

    Raises
    ------
    AnalysisError
        As `fit_ladder`.
    """
    result = {}
    for direction in (1, -1):
        chosen = [sweep for sweep in sweeps if sweep.direction == direction]
        if chosen:
            result[direction] = fit_ladder(chosen, frequencies_t)
    return result
