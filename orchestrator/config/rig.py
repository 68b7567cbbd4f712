"""The rig file: instruments, magnet, cryostat, wiring and limits of one set-up.

Every limit that protects something must be given; a rig file that leaves one out is refused.
"""

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field

from orchestrator.config.document import Document, read_document
from orchestrator.config.loading import build
from orchestrator.config.quantity import Quantity, Strict

Name = Annotated[str, Field(pattern=r"^[a-z][a-z0-9_]{0,31}$")]
FieldTesla = Annotated[float, Quantity("T", above=0, most=45)]
Rate = Annotated[float, Quantity("T/s", above=0, most=1)]
Seconds = Annotated[float, Quantity("s", above=0, most=86400)]
Kelvin = Annotated[float, Quantity("K", above=0, most=400)]


class About(Strict):
    """What the rig is called."""

    name: Annotated[str, Field(pattern=r"^[a-z][a-z0-9-]{0,47}$")]
    description: str = ""


class Facility(Strict):
    """Whose rules apply, whom to call, and who permitted unattended running. Empty: no live run."""

    rules: str = ""
    contact: str = ""
    permission: str = ""


class Spoken(Strict):
    """An instrument's VISA address and the dialect it speaks."""

    address: Annotated[str, Field(min_length=1)]
    dialect: Annotated[str, Field(min_length=1)]


class RampZone(Strict):
    """Up to field ``to`` (either sign) the ramp may be as fast as ``rate``."""

    to_t: FieldTesla = Field(alias="to")
    rate_t_per_s: Rate = Field(alias="rate")


class PersistentSwitch(Strict):
    """Times that the persistent switch takes to warm and to cool."""

    warm_s: Seconds = Field(alias="warm")
    cool_s: Seconds = Field(alias="cool")


class Magnet(Spoken):
    """Coil, supply and their ceilings."""

    field_max_t: FieldTesla = Field(
        alias="field_max", description="it keeps the coil within the field that it is made for"
    )
    coil_constant_t_per_a: Annotated[float, Quantity("T/A", above=0, most=10)] = Field(
        alias="coil_constant"
    )
    inductance_h: Annotated[float, Quantity("H", above=0, most=1000)] = Field(
        alias="inductance", description="a quench is told from a ramp by it"
    )
    lead_resistance_ohm: Annotated[float, Quantity("ohm", least=0, most=1)] = Field(
        alias="lead_resistance"
    )
    charge_voltage_max_v: Annotated[float, Quantity("V", above=0, most=100)] = Field(
        alias="charge_voltage_max",
        description="it keeps the voltage of charging within what coil and supply stand",
    )
    unexplained_voltage_max_v: Annotated[float, Quantity("V", above=0, most=10)] = Field(
        alias="unexplained_voltage_max",
        description="a terminal voltage beyond it is taken for a quench",
    )
    rate_resolution_t_per_s: Rate = Field(
        alias="rate_resolution",
        description="rates are rounded down to it, so that none is exceeded",
    )
    legs_max: Annotated[int, Field(ge=1, le=200)] = 24
    ramp_ceiling: Annotated[list[RampZone], Field(min_length=1)] = Field(
        description="it keeps the coil from a ramp so fast that it quenches"
    )
    switch: PersistentSwitch | None = None


class Stage(Spoken):
    """The sample stage, its controller, and what its temperature may be."""

    temperature_min_k: Kelvin = Field(alias="temperature_min")
    temperature_max_k: Kelvin = Field(
        alias="temperature_max", description="it keeps sample and stage from being heated too far"
    )
    temperature_trip_k: Kelvin = Field(
        alias="temperature_trip", description="above it the night parks"
    )
    ramp_max_k_per_s: Annotated[float, Quantity("K/s", above=0, most=10)] = Field(alias="ramp_max")
    response_s: Seconds = Field(alias="response")
    eddy_coefficient_w_s2_per_t2: Annotated[float, Quantity("W*s^2/T^2", least=0, most=100)] = (
        Field(alias="eddy_coefficient")
    )
    eddy_power_max_w: Annotated[float, Quantity("W", above=0, most=1)] = Field(
        alias="eddy_power_max", description="it keeps a ramp from heating the sample"
    )


class LockIn(Spoken):
    """A lock-in amplifier and the current that it drives through the sample."""

    name: Name
    measures: Literal["longitudinal", "hall"]
    excitation_a: Annotated[float, Quantity("A", above=0, most=1)] = Field(alias="excitation")
    series_resistance_ohm: Annotated[float, Quantity("ohm", above=0, most=1e10)] = Field(
        alias="series_resistance"
    )
    frequency_hz: Annotated[float, Quantity("Hz", above=0, most=1e6)] = Field(alias="frequency")
    time_constant_s: Annotated[float, Quantity("s", above=0, most=1000)] = Field(
        alias="time_constant"
    )
    filter_poles: Annotated[int, Field(ge=1, le=4)]
    sensitivity_v: Annotated[float, Quantity("V", above=0, most=10)] = Field(alias="sensitivity")


class Gauge(Spoken):
    """A gauge of a level in percent, and the level below which the night must end."""

    name: Name
    least_percent: Annotated[float, Quantity("percent", least=0, most=100)] = Field(
        alias="least", description="below it the night parks, before the cryostat is empty"
    )


class Sampling(Strict):
    """How often the instruments are read, and when a value is too old to be believed."""

    interval_s: Annotated[float, Quantity("s", least=0.01, most=3600)] = Field(alias="interval")
    stale_after_s: Seconds = Field(
        alias="stale_after", description="a value older than this is not believed; the night parks"
    )


class Rig(Strict):
    """One set-up, as its file describes it; SI floats throughout."""

    about: About = Field(alias="rig")
    facility: Facility = Facility()
    magnet: Magnet
    stage: Stage
    lock_ins: list[LockIn] = Field(alias="lockin", min_length=1)
    gauges: list[Gauge] = Field(alias="gauge", default_factory=list)
    sampling: Sampling


def load_rig(path: str | Path) -> tuple[Rig, Document]:
    """Read and check a rig file. Raises ConfigError."""
    document = read_document(path)
    rig = build(Rig, document)
    _check_ramp_ceiling(rig.magnet, document)
    _check_order(rig, document)
    _check_names(rig, document)
    return rig, document


def _check_ramp_ceiling(magnet: Magnet, document: Document) -> None:
    least = 0.0
    for index, zone in enumerate(magnet.ramp_ceiling):
        key = ("magnet", "ramp_ceiling", index, "to")
        if zone.to_t <= least:
            raise document.refuse(
                key, "zones must rise", value=f"{zone.to_t:g} T", allowed=f"above {least:g} T"
            )
        least = zone.to_t
    if least < magnet.field_max_t:
        raise document.refuse(
            key,
            "the last zone must reach field_max",
            value=f"{least:g} T",
            allowed=f"{magnet.field_max_t:g} T or more",
        )


def _check_order(rig: Rig, document: Document) -> None:
    """Values of which one must lie above another."""
    stage, sampling = rig.stage, rig.sampling
    low, high, trip = stage.temperature_min_k, stage.temperature_max_k, stage.temperature_trip_k
    pairs = (
        (("stage", "temperature_max"), high, "temperature_min", low, "K"),
        (("stage", "temperature_trip"), trip, "temperature_max", high, "K"),
        (("sampling", "stale_after"), sampling.stale_after_s, "interval", sampling.interval_s, "s"),
    )
    for key, value, below, least, unit in pairs:
        if value <= least:
            raise document.refuse(
                key,
                f"must lie above {below}",
                value=f"{value:g} {unit}",
                allowed=f"above {least:g} {unit}",
            )


def _check_names(rig: Rig, document: Document) -> None:
    taken = {"magnet", "stage"}
    named = [(("lockin", index, "name"), one.name) for index, one in enumerate(rig.lock_ins)]
    named += [(("gauge", index, "name"), one.name) for index, one in enumerate(rig.gauges)]
    for key, name in named:
        if name in taken:
            allowed = "a name of its own, not magnet or stage"
            raise document.refuse(key, "stands twice", value=f'"{name}"', allowed=allowed)
        taken.add(name)
