"""What each kind of instrument must be able to say and do, in the words that a dialect uses."""

from dataclasses import dataclass
from typing import Literal

Kind = Literal["magnet", "temperature", "lockin", "gauge"]

FLAG = "flag"


@dataclass(frozen=True, slots=True)
class Vocabulary:
    """A kind's values and settings, each with its quantity (or ``"flag"``).

    Attributes
    ----------
    values : dict
        What one look at the instrument gives; a dialect must have them all.
    settings : dict
        What can be written.
    optional : frozenset
        Settings that an instrument may lack.
    """

    values: dict[str, str]
    settings: dict[str, str]
    optional: frozenset[str] = frozenset()


VOCABULARIES: dict[Kind, Vocabulary] = {
    "magnet": Vocabulary(
        values={
            "field": "field",
            "current": "current",
            "voltage": "voltage",
            "ramping": FLAG,
            "quench": FLAG,
            "switch_heater": FLAG,
            "persistent_field": "field",
        },
        settings={
            "target": "field",
            "rate": "field rate",
            "ramping": FLAG,
            "switch_heater": FLAG,
        },
        optional=frozenset({"switch_heater"}),
    ),
    "temperature": Vocabulary(
        values={"temperature": "temperature", "setpoint": "temperature", "heater": "power"},
        settings={"setpoint": "temperature", "setpoint_ramp": "temperature rate", "heater": FLAG},
    ),
    "lockin": Vocabulary(
        values={"x": "voltage", "y": "voltage", "overload": FLAG},
        settings={
            "time_constant": "time",
            "filter_order": "count",
            "sensitivity": "voltage",
            "amplitude": "voltage",
            "frequency": "frequency",
        },
        optional=frozenset(
            {"time_constant", "filter_order", "sensitivity", "amplitude", "frequency"}
        ),
    ),
    "gauge": Vocabulary(values={"reading": "gauge"}, settings={}),
}
