"""The world file: what a simulated rig is really made of, for rehearsals.

A world that differs from the rig's limits and from the sequence's prior is the normal case. Keys
that are left out take what the rig file says of the same thing, or the simulator's own default.
Attribute names are those of the simulator's parameters.
"""

from pathlib import Path
from typing import Annotated, Any

from pydantic import Field

from orchestrator.config.document import Document, read_document
from orchestrator.config.loading import build
from orchestrator.config.quantity import Quantity, Strict

Positive = Annotated[float, Quantity("1", above=0, most=1e6)]
Tesla = Annotated[float, Quantity("T", above=0, most=1e6)]
Seconds = Annotated[float, Quantity("s", least=0, most=1e6)]
Volt = Annotated[float, Quantity("V", least=0, most=1e3)]
Kelvin = Annotated[float, Quantity("K", above=0, most=400)]
Ohm = Annotated[float, Quantity("ohm", above=0, most=1e9)]
Watt = Annotated[float, Quantity("W", least=0, most=1e3)]
Percent = Annotated[float, Quantity("percent", least=0, most=100)]
PerTesla = Annotated[float, Quantity("1/T", least=-10, most=10)]
PerTesla2 = Annotated[float, Quantity("1/T^2", least=-10, most=10)]
Radian = Annotated[float, Quantity("rad", least=-6.2832, most=6.2832)]
Losses = Annotated[float, Quantity("W*s^2/T^2", least=0, most=1e6)]


class AboutWorld(Strict):
    """What the world is called, and the seed of its noise."""

    name: Annotated[str, Field(pattern=r"^[a-z][a-z0-9-]{0,47}$")]
    seed: Annotated[int, Field(ge=0, lt=2**63)] = 1


class RateZone(Strict):
    """Up to field ``to``: ``rate``."""

    to_t: Tesla = Field(alias="to")
    rate_t_per_s: Annotated[float, Quantity("T/s", above=0, most=10)] = Field(alias="rate")


class Part(Strict):
    """A part of the world whose keys may be left out."""

    def given(self) -> dict[str, Any]:
        """What the file says, by the simulator's names."""
        return self.model_dump(exclude_unset=True)


class Coil(Part):
    """The coil with its supply."""

    coil_constant_t_per_a: Annotated[float, Quantity("T/A", above=0, most=10)] | None = Field(
        default=None, alias="coil_constant"
    )
    inductance_h: Annotated[float, Quantity("H", above=0, most=1000)] | None = Field(
        default=None, alias="inductance"
    )
    lead_resistance_ohm: Annotated[float, Quantity("ohm", least=0, most=1)] | None = Field(
        default=None, alias="lead_resistance"
    )
    charge_voltage_max_v: Volt | None = Field(default=None, alias="charge_voltage_max")
    field_lag_s: Seconds | None = Field(default=None, alias="field_lag")
    voltage_noise_v: Volt | None = Field(default=None, alias="voltage_noise")
    field_noise_t: Annotated[float, Quantity("T", least=0, most=1)] | None = Field(
        default=None, alias="field_noise"
    )
    quench_decay_s: Seconds | None = Field(default=None, alias="quench_decay")
    ramp_quench: list[RateZone] | None = None
    supply_rates: list[RateZone] | None = None
    slew_t_per_s2: Annotated[float, Quantity("T/s^2", least=0, most=10)] | None = Field(
        default=None, alias="slew"
    )
    joint_resistance_ohm: Annotated[float, Quantity("ohm", least=0, most=1e-3)] | None = Field(
        default=None, alias="joint_resistance"
    )
    switch_resistance_ohm: Annotated[float, Quantity("ohm", least=0, most=1e4)] | None = Field(
        default=None, alias="switch_resistance"
    )
    switch_mismatch_t: Annotated[float, Quantity("T", above=0, most=10)] | None = Field(
        default=None, alias="switch_mismatch"
    )
    remanence_t: Annotated[float, Quantity("T", least=0, most=1)] | None = Field(
        default=None, alias="remanence"
    )
    reversal_t: Annotated[float, Quantity("T", above=0, most=45)] | None = Field(
        default=None, alias="reversal"
    )
    quench_rate_per_h: Annotated[float, Quantity("1/hour", least=0, most=100)] | None = Field(
        default=None, alias="quench_rate"
    )
    quench_voltage_share: Annotated[float, Quantity("1", least=0, most=1)] | None = None
    heat_capacity_j_per_k4: Annotated[float, Quantity("J/K^4", least=0, most=1e3)] | None = Field(
        default=None, alias="heat_capacity"
    )
    hot_spot_share: Annotated[float, Quantity("1", above=0, most=1)] | None = None
    recovery_w: Annotated[float, Quantity("W", above=0, most=1e5)] | None = Field(
        default=None, alias="recovery"
    )
    sharing_k: Annotated[float, Quantity("K", least=0, most=100)] | None = Field(
        default=None, alias="sharing_temperature"
    )
    sharing_t: Annotated[float, Quantity("T", above=0, most=100)] | None = Field(
        default=None, alias="sharing_field"
    )
    covered_percent: Percent | None = Field(default=None, alias="covered")
    bare_w: Watt | None = Field(default=None, alias="bare_heat")

    def given(self) -> dict[str, Any]:
        values = super().given()
        for name in ("ramp_quench", "supply_rates"):
            if (zones := getattr(self, name)) is not None:
                values[name] = tuple((zone.to_t, zone.rate_t_per_s) for zone in zones)
        return values


class ThermometerError(Strict):
    """At ``field`` the thermometer shows (1 + ``relative``) times the true temperature."""

    field_t: Tesla = Field(alias="field")
    relative: Annotated[float, Quantity("1", above=-1, most=1)]


class StagePart(Part):
    """The sample stage, its cold end and its thermometer."""

    base_k: Kelvin | None = Field(default=None, alias="base")
    maximum_k: Kelvin | None = Field(default=None, alias="maximum")
    start_k: Kelvin | None = Field(default=None, alias="start")
    heat_capacity_j_per_k: Annotated[float, Quantity("J/K", least=0, most=1e3)] | None = Field(
        default=None, alias="heat_capacity"
    )
    heat_capacity_linear_j_per_k2: Annotated[float, Quantity("J/K^2", least=0, most=1e3)] | None = (
        Field(default=None, alias="heat_capacity_linear")
    )
    heat_capacity_cubic_j_per_k4: Annotated[float, Quantity("J/K^4", least=0, most=1e3)] | None = (
        Field(default=None, alias="heat_capacity_cubic")
    )
    cooling_w_per_k: Annotated[float, Quantity("W/K", above=0, most=1e3)] | None = Field(
        default=None, alias="cooling"
    )
    cooling_exponent: Annotated[float, Quantity("1", least=0, most=6)] | None = None
    cooling_reference_k: Kelvin | None = Field(default=None, alias="cooling_reference")
    heater_max_w: Watt | None = Field(default=None, alias="heater_max")
    heater_ranges_w: (
        Annotated[
            list[Annotated[float, Quantity("W", above=0, most=1e3)]],
            Field(min_length=1, max_length=20),
        ]
        | None
    ) = Field(default=None, alias="heater_ranges")
    response_s: Seconds | None = Field(default=None, alias="response")
    loop_on_thermometer: bool | None = None
    loop_period_s: Annotated[float, Quantity("s", least=0.01, most=10)] | None = Field(
        default=None, alias="loop_period"
    )
    curie_j_k_per_t2: Annotated[float, Quantity("J*K/T^2", least=0, most=1e3)] | None = Field(
        default=None, alias="curie"
    )
    sample_conductance_w_per_k: Annotated[float, Quantity("W/K", least=0, most=1e3)] | None = Field(
        default=None, alias="sample_conductance"
    )
    thermometer_error_per_t2: Annotated[float, Quantity("1/T^2", least=-4e-4, most=1e-2)] | None = (
        Field(default=None, alias="thermometer_error_quadratic")
    )
    thermometer_error: (
        Annotated[list[ThermometerError], Field(min_length=1, max_length=100)] | None
    ) = None
    bath_pressure_pa: Annotated[float, Quantity("Pa", least=115, most=1.96e5)] | None = Field(
        default=None, alias="bath_pressure"
    )
    charge_j: Annotated[float, Quantity("J", above=0, most=1e7)] | None = Field(
        default=None, alias="charge"
    )
    charge_leak_w: Watt | None = Field(default=None, alias="charge_leak")
    spent_base_k: Kelvin | None = Field(default=None, alias="spent_base")
    recharge_s: Annotated[float, Quantity("s", above=0, most=1e6)] | None = Field(
        default=None, alias="recharge_time"
    )
    eddy_w_s2_per_t2: Losses | None = Field(default=None, alias="eddy_coefficient")
    sample_lag_s: Seconds | None = Field(default=None, alias="sample_lag")
    thermometer_lag_s: Seconds | None = Field(default=None, alias="thermometer_lag")
    noise_k: Annotated[float, Quantity("K", least=0, most=10)] | None = Field(
        default=None, alias="noise"
    )

    def given(self) -> dict[str, Any]:
        values = super().given()
        if self.heater_ranges_w is not None:
            values["heater_ranges_w"] = tuple(self.heater_ranges_w)
        if self.thermometer_error is not None:
            table = self.thermometer_error
            values["thermometer_error"] = tuple((one.field_t, one.relative) for one in table)
        return values


class HeliumPart(Part):
    """The helium bath."""

    capacity_l: Annotated[float, Quantity("litre", above=0, most=1e4)] | None = Field(
        default=None, alias="capacity"
    )
    level_percent: Percent | None = Field(default=None, alias="level")
    static_w: Watt | None = Field(default=None, alias="static_heat")
    ramp_w_s2_per_t2: Losses | None = Field(default=None, alias="ramp_losses")
    switch_heater_w: Watt | None = Field(default=None, alias="switch_heater")


class Surroundings(Part):
    """What reaches every lock-in: the frequency of the line, and knocks on the cryostat."""

    mains_hz: Annotated[float, Quantity("Hz", least=10, most=1e3)] | None = Field(
        default=None, alias="mains_frequency"
    )
    knocks_per_h: Annotated[float, Quantity("1/h", least=0, most=3600)] | None = Field(
        default=None, alias="knocks"
    )


class LockInPart(Part):
    """Noise, wiring and interference of one lock-in, by the name it has in the rig."""

    name: str
    noise_v_per_rthz: Annotated[float, Quantity("V/Hz^0.5", least=0, most=1)] | None = Field(
        default=None, alias="noise"
    )
    noise_corner_hz: Annotated[float, Quantity("Hz", least=0, most=1e6)] | None = Field(
        default=None, alias="noise_corner"
    )
    johnson_noise: bool | None = None
    pickup_v_s_per_t: Annotated[float, Quantity("V*s/T", least=-1, most=1)] | None = Field(
        default=None, alias="pickup"
    )
    wiring_phase_rad: Radian | None = Field(default=None, alias="wiring_phase")
    coupling_per_hz: Annotated[float, Quantity("1/Hz", least=-1, most=1)] | None = Field(
        default=None, alias="coupling"
    )
    third_harmonic: Annotated[float, Quantity("1", least=-0.3, most=0.3)] | None = None
    third_harmonic_at_a: Annotated[float, Quantity("A", above=0, most=1)] | None = Field(
        default=None, alias="third_harmonic_at"
    )
    mains_v: Annotated[list[Volt], Field(min_length=1, max_length=20)] | None = Field(
        default=None, alias="mains"
    )
    mains_phase_rad: Radian | None = Field(default=None, alias="mains_phase")
    knock_v_s: Annotated[float, Quantity("V*s", least=0, most=1)] | None = Field(
        default=None, alias="knock"
    )
    knock_step_v: Volt | None = Field(default=None, alias="knock_step")
    full_scales_v: (
        Annotated[
            list[Annotated[float, Quantity("V", least=1e-9, most=10)]],
            Field(min_length=1, max_length=60),
        ]
        | None
    ) = Field(default=None, alias="full_scales")
    input_range_v: Annotated[float, Quantity("V", above=0, most=1e3)] | None = Field(
        default=None, alias="input_range"
    )

    def given(self) -> dict[str, Any]:
        values = super().given()
        for key in ("mains_v", "full_scales_v"):
            if key in values:
                values[key] = tuple(values[key])
        return values


class TrueOrbit(Strict):
    """One orbit of the sample, as it really is."""

    frequency_t: Tesla = Field(alias="frequency")
    mass: Annotated[float, Quantity("1", above=0, most=100)]
    dingle_k: Annotated[float, Quantity("K", least=0, most=100)] = Field(alias="dingle")
    amplitude: Annotated[float, Quantity("1", above=0, most=10)]
    phase: Annotated[float, Quantity("1", least=-1, most=1)] = 0.0
    harmonics: Annotated[int, Field(ge=1, le=10)] = 1


class TrueGas(Strict):
    """A two-dimensional gas, as it really is."""

    density_m2: Annotated[float, Quantity("1/m^2", above=1e12, most=1e18)] = Field(alias="density")
    mass: Annotated[float, Quantity("1", above=0, most=100)]
    dingle_k: Annotated[float, Quantity("K", least=0.01, most=100)] = Field(alias="dingle")
    degeneracy: Annotated[int, Field(ge=1, le=24)] = 2
    extended_share: Annotated[float, Quantity("1", least=0.05, most=1)] = 0.2


class SamplePart(Strict):
    """The sample, as it really is: orbits, or a two-dimensional gas."""

    resistance_ohm: Ohm = Field(alias="resistance")
    magnetoresistance_per_t: PerTesla = Field(default=0.0, alias="magnetoresistance_linear")
    magnetoresistance_per_t2: PerTesla2 = Field(default=0.0, alias="magnetoresistance_quadratic")
    hall_density_m2: Annotated[float, Quantity("1/m^2", least=-1e22, most=1e22)] | None = Field(
        default=None, alias="hall_density"
    )
    orbits: Annotated[list[TrueOrbit], Field(min_length=1, max_length=20)] | None = None
    gas: TrueGas | None = None


class WorldFile(Strict):
    """The whole simulated truth."""

    about: AboutWorld = Field(alias="world")
    sample: SamplePart
    coil: Coil = Coil()
    stage: StagePart = StagePart()
    helium: HeliumPart = HeliumPart()
    surroundings: Surroundings = Surroundings()
    lock_ins: list[LockInPart] = Field(default_factory=list, alias="lockin")


def load_world(path: str | Path) -> tuple[WorldFile, Document]:
    """Read and check a world file. Raises ConfigError."""
    document = read_document(path)
    model = build(WorldFile, document)
    _check_sample(model.sample, document)
    return model, document


def _check_sample(sample: SamplePart, document: Document) -> None:
    """Orbits with their Hall density, or a gas, which has all of that in it."""
    of_orbits = ("orbits", "hall_density")
    of_smooth = ("magnetoresistance_linear", "magnetoresistance_quadratic")
    given = {
        field.alias or name
        for name, field in SamplePart.model_fields.items()
        if name in sample.model_fields_set
    }
    if sample.gas is None:
        for key in of_orbits:
            if key not in given:
                raise document.refuse(("sample", key), "is missing, and has no default")
        return
    for key in (*of_orbits, *of_smooth):
        if key in given:
            raise document.refuse(("sample", key), "does not go with sample.gas")
