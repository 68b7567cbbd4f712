"""The composition root: here files become rigs, simulated worlds, benches and nights."""

from dataclasses import dataclass
from importlib import resources
from pathlib import Path
from typing import Any

from orchestrator.config.document import Document
from orchestrator.config.rig import Rig, load_rig
from orchestrator.config.sequence import Sequence, load_sequence
from orchestrator.config.world import WorldFile, load_world
from orchestrator.physics.orbits import frequency_of_density_2d_t
from simulators.coil import CoilParameters
from simulators.cryostat import StageParameters
from simulators.gas_sample import gas_of
from simulators.helium import HeliumParameters
from simulators.landau import GasParameters
from simulators.lockin_parameters import LockInParameters, Surroundings
from simulators.sample import Orbit, SampleParameters
from simulators.world import GaugeParameters, WorldParameters

DEMONSTRATION_RIG = "rigs/demonstration.toml"
DEMONSTRATION_WORLD = "worlds/demonstration.toml"
SHORT_EVENING = "short-evening.toml"


def shipped(name: str) -> Path:
    """Path of a file that is installed with the package ``sequences``."""
    return Path(str(resources.files("sequences").joinpath(*name.split("/"))))


@dataclass(frozen=True)
class Files:
    """The files of a night, read and checked."""

    rig: Rig
    rig_document: Document
    sequence: Sequence
    sequence_document: Document


@dataclass(frozen=True)
class Simulated:
    """The world file of a rehearsal, read and checked against the rig."""

    world: WorldFile
    document: Document


def load_files(rig: Path | None, sequence: Path | None) -> Files:
    """Read rig and sequence, the shipped ones where none is given. Raises ConfigError."""
    rig_model, rig_document = load_rig(rig or shipped(DEMONSTRATION_RIG))
    sequence_model, sequence_document = load_sequence(
        sequence or shipped(SHORT_EVENING), rig_model, rig_document
    )
    return Files(rig_model, rig_document, sequence_model, sequence_document)


def load_simulated(world: Path | None, rig: Rig) -> Simulated:
    """Read a world file, the shipped one where none is given. Raises ConfigError."""
    model, document = load_world(world or shipped(DEMONSTRATION_WORLD))
    names = {one.name for one in rig.lock_ins}
    for index, lock_in in enumerate(model.lock_ins):
        if lock_in.name not in names:
            raise document.refuse(
                ("lockin", index, "name"),
                "is not a lock-in of the rig",
                value=f'"{lock_in.name}"',
                allowed=", ".join(sorted(names)),
            )
        try:
            LockInParameters(**lock_in.given())
        except ValueError as error:
            raise document.refuse(("lockin", index), str(error)) from None
    for key, parameters in (("stage", _stage_parameters), ("coil", _coil_parameters)):
        try:
            parameters(rig, model)
        except ValueError as error:
            raise document.refuse((key,), str(error)) from None
    return Simulated(model, document)


def world_parameters(rig: Rig, world: WorldFile, seed: int) -> WorldParameters:
    """The simulated world: what the world file says, and what the rig says where it is silent."""
    noise = {one.name: one.given() for one in world.lock_ins}
    lock_ins = tuple(
        LockInParameters(
            measures=one.measures,
            series_resistance_ohm=one.series_resistance_ohm,
            **{"name": one.name, **noise.get(one.name, {})},
        )
        for one in rig.lock_ins
    )
    return WorldParameters(
        seed=seed,
        coil=_coil_parameters(rig, world),
        stage=_stage_parameters(rig, world),
        sample=_sample_parameters(rig, world),
        helium=HeliumParameters(**world.helium.given()),
        lock_ins=lock_ins,
        gauges=tuple(GaugeParameters(one.name) for one in rig.gauges),
        surroundings=Surroundings(**world.surroundings.given()),
    )


def _coil_parameters(rig: Rig, world: WorldFile) -> CoilParameters:
    magnet = rig.magnet
    coil: dict[str, Any] = {
        "coil_constant_t_per_a": magnet.coil_constant_t_per_a,
        "inductance_h": magnet.inductance_h,
        "lead_resistance_ohm": magnet.lead_resistance_ohm,
        "field_max_t": magnet.field_max_t,
        "rate_resolution_t_per_s": magnet.rate_resolution_t_per_s,
        "charge_voltage_max_v": magnet.charge_voltage_max_v,
        "switch_present": magnet.switch is not None,
    }
    if magnet.switch:
        coil |= {"switch_warm_s": magnet.switch.warm_s, "switch_cool_s": magnet.switch.cool_s}
    return CoilParameters(**coil | world.coil.given())


def _sample_parameters(rig: Rig, world: WorldFile) -> SampleParameters:
    sample = world.sample
    if sample.gas is not None:
        stage = _stage_parameters(rig, world)
        return gas_of(
            GasParameters(
                **sample.gas.model_dump(),
                resistance_ohm=sample.resistance_ohm,
                field_max_t=rig.magnet.field_max_t,
                coldest_k=stage.base_k,
                hottest_k=stage.maximum_k,
            )
        )
    assert sample.hall_density_m2 is not None
    assert sample.orbits is not None
    return SampleParameters(
        resistance_ohm=sample.resistance_ohm,
        magnetoresistance_per_t=sample.magnetoresistance_per_t,
        magnetoresistance_per_t2=sample.magnetoresistance_per_t2,
        hall_density_m2=sample.hall_density_m2,
        orbits=tuple(Orbit(**one.model_dump()) for one in sample.orbits),
    )


def _stage_parameters(rig: Rig, world: WorldFile) -> StageParameters:
    eddy = {"eddy_w_s2_per_t2": rig.stage.eddy_coefficient_w_s2_per_t2}
    return StageParameters(**eddy | world.stage.given())


def truth_of(world: WorldFile) -> list[dict[str, float]]:
    """What the analysis ought to find, for the table at the end of a rehearsal."""
    if gas := world.sample.gas:
        frequency_t = frequency_of_density_2d_t(gas.density_m2, gas.degeneracy)
        return [{"frequency_t": frequency_t, "mass": gas.mass, "dingle_k": gas.dingle_k}]
    return [
        {"frequency_t": one.frequency_t, "mass": one.mass, "dingle_k": one.dingle_k}
        for one in world.sample.orbits or []
    ]


def addresses_of(rig: Rig) -> dict[str, str]:
    """The VISA address of each instrument, by its name."""
    return {
        "magnet": rig.magnet.address,
        "stage": rig.stage.address,
        **{one.name: one.address for one in rig.lock_ins},
        **{one.name: one.address for one in rig.gauges},
    }
