"""A two-dimensional gas as the sample of a world: what `Sample` gives, from the Landau levels."""

import math

import numpy as np
from scipy import constants

from simulators.landau import Gas, GasParameters, GasTable
from simulators.sample import FIELD_MIN_T, SampleParameters

_WIDTHS_A_PERIOD = 0.1  # of 1/B: a level this wide is followed as a plain wave is


class GasSample:
    """The gas made ready; the smooth part is the classical one.

    Parameters
    ----------
    parameters : SampleParameters
        With its ``gas``.
    """

    def __init__(self, parameters: SampleParameters) -> None:
        assert parameters.gas is not None
        gas = parameters.gas
        self.parameters = parameters
        self._gas = gas
        self._table = GasTable(gas)
        self._hall_ohm_per_t = 1.0 / (gas.density_m2 * constants.e)
        self.slowest_t = 2 * math.pi * gas.frequency_t
        # Sharp levels are followed by more steps of the phase than a plain wave.
        narrowest = Gas(gas).extended_width(np.array([gas.field_max_t]), gas.coldest_k)
        self.phase_t = self.slowest_t * max(1.0, _WIDTHS_A_PERIOD / float(narrowest[0]))
        self.clear_t = self._table.lowest_t

    def background_ohm(self, field_t: float) -> float:
        """rho_xx without its oscillations."""
        return self._gas.resistance_ohm

    def smooth_hall_ohm(self, field_t: float) -> float:
        """B/(n e)."""
        return self._hall_ohm_per_t * field_t

    def longitudinal_ohms(self, fields_t: list[float], kelvins: list[float]) -> list[float]:
        """rho_xx at several fields and temperatures."""
        ohms = self._table.longitudinal_ohms(np.array(fields_t), np.array(kelvins))
        return [float(one) for one in ohms]

    def hall_ohms(self, fields_t: list[float], kelvins: list[float]) -> list[float]:
        """rho_xy at several fields and temperatures."""
        return [float(one) for one in self._table.hall_ohms(np.array(fields_t), np.array(kelvins))]

    def oscillation_bound(self, field_t: float) -> float:
        """Nothing is left out: where the table begins, oscillations are below what it sees."""
        return 0.0 if field_t <= max(FIELD_MIN_T, self._table.lowest_t) else math.inf


def gas_of(parameters: GasParameters) -> SampleParameters:
    """A sample that is this gas and nothing else."""
    return SampleParameters(
        resistance_ohm=parameters.resistance_ohm,
        magnetoresistance_per_t=0.0,
        magnetoresistance_per_t2=0.0,
        hall_density_m2=parameters.density_m2,
        gas=parameters,
    )
