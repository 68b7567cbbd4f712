"""Ceilings: at each field the largest ramp rate, and the reason for it.

Between its edges a ceiling is monotonic in the field's magnitude, so that its least value over a
stretch is found at the stretch's ends, at zero field, or at an edge.
"""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from orchestrator.config.rig import Magnet, Stage
from orchestrator.physics.magnet import rate_for_eddy_heating

Array = NDArray[np.float64]

READS_HIGH = 1e-3  # relative; a supply at its largest field may read so much more (common practice)


@dataclass(frozen=True)
class Ceiling:
    """One reason to be slow.

    Attributes
    ----------
    name : str
        What binds, for people: ``"magnet table"``, ``"charge voltage"``.
    rate_t_per_s : Callable[[Array], Array]
        Largest rate in T/s at each magnitude of the field in T.
    edges_t : tuple of float
        Magnitudes at which the rate jumps; between them it is monotonic in the magnitude.
    """

    name: str
    rate_t_per_s: Callable[[Array], Array]
    edges_t: tuple[float, ...] = ()


@dataclass(frozen=True)
class Ceilings:
    """Several ceilings together; the lowest binds."""

    members: tuple[Ceiling, ...]

    def at(self, field_t: Array) -> tuple[Array, list[str]]:
        """The rate in T/s allowed at each field in T, and the name of the ceiling that binds."""
        size = np.abs(np.asarray(field_t, dtype=float))
        rates = self._rates(size)
        binding = np.argmin(rates, axis=0)
        return rates.min(axis=0), [self.members[index].name for index in binding]

    def over(self, from_t: float, to_t: float) -> tuple[float, str]:
        """The rate in T/s allowed everywhere on a stretch of field, and what binds it."""
        low, high = sorted((from_t, to_t))
        points = {abs(low), abs(high)} | ({0.0} if low < 0 < high else set())
        least, most = min(points), max(points)
        points.update(edge for edge in self._edges_t if least <= edge <= most)
        # A row for each point, so that the first of equal rates is the one nearest to zero field.
        rates = self._rates(np.array(sorted(points))).T
        point, member = divmod(int(rates.argmin()), len(self.members))
        return float(rates[point, member]), self.members[member].name

    def _rates(self, size_t: Array) -> Array:
        """The rate that each member allows, a row for each, at magnitudes of the field."""
        return np.array([member.rate_t_per_s(size_t) for member in self.members])

    @cached_property
    def _edges_t(self) -> tuple[float, ...]:
        """Every edge, and the field just beyond it: an edge belongs to the zone below it."""
        edges = [edge for member in self.members for edge in member.edges_t]
        return tuple(side for edge in edges for side in (edge, math.nextafter(edge, math.inf)))


def magnet_table(magnet: Magnet) -> Ceiling:
    """The rig's table; a zone's edge belongs to the zone below it, and beyond the last: no ramp.

    The last zone ends a thousandth higher, for what a supply at its largest field may read.
    """
    edges = np.array([zone.to_t for zone in magnet.ramp_ceiling])
    edges[-1] *= 1 + READS_HIGH
    rates = np.array([*(zone.rate_t_per_s for zone in magnet.ramp_ceiling), 0.0])
    return Ceiling(
        "magnet table",
        lambda size: rates[np.searchsorted(edges, size, side="left")],
        tuple(float(edge) for edge in edges),
    )


def charge_voltage(magnet: Magnet) -> Ceiling:
    """What is left of the charge voltage after the leads' drop drives L dI/dt (Wilson 1983)."""
    scale = magnet.coil_constant_t_per_a

    def rate(size: Array) -> Array:
        left = magnet.charge_voltage_max_v - magnet.lead_resistance_ohm * size / scale
        return np.maximum(left, 0.0) * scale / magnet.inductance_h

    return Ceiling("charge voltage", rate)


def eddy_heating(stage: Stage) -> Ceiling:
    """The rate whose eddy heating of the stage is what the rig allows (Ekin 2006)."""
    most = rate_for_eddy_heating(stage.eddy_coefficient_w_s2_per_t2, stage.eddy_power_max_w)
    return Ceiling("eddy heating", lambda size: np.full_like(size, most))


def constant(name: str, rate_t_per_s: float) -> Ceiling:
    """The same rate everywhere, such as the sequence's own limit."""
    return Ceiling(name, lambda size: np.full_like(size, rate_t_per_s))


def safety(magnet: Magnet) -> Ceilings:
    """The ceilings that protect the magnet; no finding and no sequence ever loosens them."""
    return Ceilings((magnet_table(magnet), charge_voltage(magnet)))


def with_more(ceilings: Ceilings, more: Sequence[Ceiling]) -> Ceilings:
    """The same ceilings and some more."""
    return Ceilings((*ceilings.members, *more))
