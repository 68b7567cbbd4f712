"""What a reading is: one sampled set of values with its times, as the instruments gave it."""

from collections.abc import Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Channel:
    """One column of a reading.

    Attributes
    ----------
    name : str
        Column name with its unit last, such as ``field_t``, ``sample_k`` or ``rxx_x_v``.
    unit : str
        The unit as text: ``"T"``, ``"K"``, ``"V"``; empty for a flag, which reads 0 or 1.
    instrument : str
        Name of the rig's instrument that supplies the value.
    """

    name: str
    unit: str
    instrument: str


@dataclass(frozen=True, slots=True)
class Reading:
    """One row of the ledger.

    Attributes
    ----------
    number : int
        Sequence number in the night, from 1, without gaps.
    time_s : float
        Time of the night's clock at which the set was asked for.
    unix_s : float
        Wall time beside it, seconds since 1970; never computed with.
    step : str
        Name of the step that was running.
    values : Mapping[str, float]
        Channel name to value in the channel's unit. NaN where the instrument did not answer.
    taken_s : Mapping[str, float]
        Instrument name to the time at which its answer came; an instrument that did not answer
        is absent. The age of a value is a property of the reading, never assumed.
    """

    number: int
    time_s: float
    unix_s: float
    step: str
    values: Mapping[str, float]
    taken_s: Mapping[str, float]
