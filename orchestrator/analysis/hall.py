"""Carrier density and mobility from the Hall resistance."""

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy import constants

from orchestrator.analysis.sweeps import LEAST_POINTS, AnalysisError, Sweep
from orchestrator.analysis.uncertainty import autocovariance, lag_products, sandwich_covariance
from orchestrator.physics import lockin

FloatArray = npt.NDArray[np.float64]

_LAGS = 12
_NEAR_ZERO = 0.1  # a sweep that comes this near to zero field, of its largest, shows R(0)


@dataclass(frozen=True)
class HallFinding:
    """Sheet density and mobility; standard deviations in the unit of the value, None: not known.

    Attributes
    ----------
    slope_ohm_per_t, slope_sd_ohm_per_t : float
        Hall resistance over field, signed as wired.
    density_m2, density_sd_m2 : float
        Carriers per m^2, 1 / (e |slope|), one kind of carrier assumed.
    zero_field_ohm, zero_field_sd_ohm : float or None
        Longitudinal resistance at zero field.
    mobility_m2_per_vs, mobility_sd_m2_per_vs : float or None
        |slope| / R(0) in m^2/(V s), with R(0) per square: `assumption` says of which geometry.
    assumption : str
        In words, for reports.
    """

    slope_ohm_per_t: float
    slope_sd_ohm_per_t: float
    density_m2: float
    density_sd_m2: float
    zero_field_ohm: float | None
    zero_field_sd_ohm: float | None
    mobility_m2_per_vs: float | None
    mobility_sd_m2_per_vs: float | None
    assumption: str


def analyse_hall(
    sweeps: Sequence[Sweep], *, zero_field_ohm: float | None = None, squares: float = 1.0
) -> HallFinding:
    """Fit one Hall slope to all sweeps that have a Hall resistance, each with an offset of its own.

    Parameters
    ----------
    sweeps : sequence of Sweep
        At least one with `hall_ohm`.
    zero_field_ohm : float, optional
        Longitudinal resistance at zero field in ohm, taken as exact. Left out, it is fitted where
        a sweep comes within a tenth of its largest field to zero; else there is no mobility.
    squares : float
        Length over width of the sample between the voltage contacts.

    Returns
    -------
    HallFinding

    Raises
    ------
    AnalysisError
        If no sweep has a Hall resistance, values are missing, or the slope is not above 3 standard
        deviations.

    Notes
    -----
    R_xy = B / (n e) for one kind of carrier and classically strong or weak field.
    """
    if not squares > 0:
        raise AnalysisError(f"squares: {squares!r}, allowed: above 0")
    columns, targets, starts = [], [], [0]
    for sweep in sweeps:
        if sweep.hall_ohm is None:
            continue
        field = _then(sweep)
        if not np.all(np.isfinite(sweep.hall_ohm)) or not np.all(np.isfinite(field)):
            raise AnalysisError(f'sweep "{sweep.name}": hall_ohm or field_t has values missing')
        if field.size < LEAST_POINTS or float(np.ptp(field)) == 0:
            raise AnalysisError(
                f'sweep "{sweep.name}": {field.size} points over {float(np.ptp(field)):g} T for '
                f"the Hall slope, allowed: {LEAST_POINTS} points or more of a moving field"
            )
        columns.append(field - field.mean())
        targets.append(sweep.hall_ohm - sweep.hall_ohm.mean())
        starts.append(starts[-1] + field.size)
    if not columns:
        raise AnalysisError("no sweep has a Hall resistance")
    slope, slope_sd = _line(np.concatenate(columns)[:, None], np.concatenate(targets), starts)
    if abs(slope[0]) < 3 * slope_sd[0]:
        raise AnalysisError(
            f"Hall slope: {slope[0]:.3g} +- {slope_sd[0]:.2g} ohm/T, "
            "allowed: above 3 standard deviations"
        )
    density = 1 / (constants.e * abs(slope[0]))
    relative = float(slope_sd[0] / abs(slope[0]))
    zero, zero_sd = _zero_field_ohm(sweeps) if zero_field_ohm is None else (zero_field_ohm, 0.0)
    mobility = mobility_sd = None
    if zero is not None and zero_sd is not None and zero > 0:
        mobility = float(abs(slope[0])) * squares / zero
        mobility_sd = mobility * math.hypot(relative, zero_sd / zero)
    return HallFinding(
        slope_ohm_per_t=float(slope[0]),
        slope_sd_ohm_per_t=float(slope_sd[0]),
        density_m2=float(density),
        density_sd_m2=float(density * relative),
        zero_field_ohm=zero,
        zero_field_sd_ohm=zero_sd,
        mobility_m2_per_vs=mobility,
        mobility_sd_m2_per_vs=mobility_sd,
        assumption=(
            "one kind of carrier; a sheet with "
            f"{squares:g} square{'' if squares == 1 else 's'} between the voltage contacts"
        ),
    )


def _then(sweep: Sweep) -> FloatArray:
    """Signed field at the time each reading tells of."""
    lag = lockin.lag_s(sweep.time_constant_s, sweep.poles)
    return np.asarray(np.interp(sweep.time_s - lag, sweep.time_s, sweep.field_t))


def _line(
    matrix: FloatArray, target: FloatArray, starts: Sequence[int]
) -> tuple[FloatArray, FloatArray]:
    """Least-squares parameters and standard deviations, noise correlated between neighbours."""
    values = np.linalg.lstsq(matrix, target, rcond=None)[0]
    residual = target - matrix @ values
    pieces = [residual[a:b] for a, b in itertools.pairwise(starts)]
    used = lag_products(np.linalg.qr(matrix)[0], starts, _LAGS)
    noise = autocovariance(pieces, _LAGS, used)
    try:
        covariance = sandwich_covariance(matrix, starts, noise)
    except np.linalg.LinAlgError as error:
        raise AnalysisError(f"no uncertainty of the fit: {error}") from error
    return np.asarray(values), np.sqrt(np.diag(covariance))


def _zero_field_ohm(sweeps: Sequence[Sweep]) -> tuple[float | None, float | None]:
    """R(0) from 1, |B| and B^2 fitted to the lowest third of the sweep that comes nearest zero."""
    best: tuple[float, float] | None = None
    for sweep in sweeps:
        size = np.abs(_then(sweep))
        low = size < size.max() / 3
        if size.min() > _NEAR_ZERO * size.max() or int(low.sum()) < LEAST_POINTS:
            continue
        field = size[low]
        matrix = np.stack([np.ones(field.shape), field, field**2], axis=1)
        values, sd = _line(matrix, sweep.resistance_ohm[low], [0, field.size])
        if best is None or sd[0] < best[1]:
            best = float(values[0]), float(sd[0])
    return best if best is not None else (None, None)
