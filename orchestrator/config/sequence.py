"""The sequence file: what to do in a night, and what is thought of the sample beforehand."""

from collections.abc import Iterator
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field

from orchestrator.config.document import Document, Key, read_document
from orchestrator.config.loading import build
from orchestrator.config.quantity import Quantity, Strict
from orchestrator.config.rig import Rig

FieldTesla = Annotated[float, Quantity("T", least=-45, most=45)]
Kelvin = Annotated[float, Quantity("K", above=0, most=400)]
Seconds = Annotated[float, Quantity("s", above=0, most=604800)]
StepName = Annotated[str, Field(pattern=r"^[a-z0-9][a-z0-9-]{0,47}$")]


class PriorOrbit(Strict):
    """One oscillation frequency that is expected, with its mass and Dingle temperature."""

    frequency_t: Annotated[float, Quantity("T", above=0, most=1e6)] = Field(alias="frequency")
    mass: Annotated[float, Quantity("1", above=0, most=100)]
    dingle_k: Annotated[float, Quantity("K", least=0, most=100)] = Field(alias="dingle")


class Prior(Strict):
    """What is thought of the sample. ``spread``: by how much, relatively, it may be wrong."""

    spread: Annotated[float, Quantity("1", least=0, most=1)] = 0.2
    orbits: Annotated[list[PriorOrbit], Field(min_length=1)]


class FieldSweep(Strict):
    """A continuous sweep of the field that adapts its rate to the predicted 1/B period."""

    kind: Literal["field-sweep"]
    name: StepName
    from_t: FieldTesla = Field(alias="from")
    to_t: FieldTesla = Field(alias="to")
    direction: Literal["as-given", "reversed", "both", "nearest"] = "as-given"
    samples_per_period: Annotated[float, Quantity("1", least=2.5, most=1000)] = 10.0
    filter_loss: Annotated[float, Quantity("1", above=0, most=0.5)] = 0.05
    harmonic: Annotated[int, Field(ge=1, le=10)] = 1
    rate_max_t_per_s: Annotated[float, Quantity("T/s", above=0, most=1)] | None = Field(
        default=None, alias="rate_max"
    )


class Settle(Strict):
    """Go to a temperature, and wait until it stays within the tolerance for the window."""

    kind: Literal["settle"]
    name: StepName
    temperature_k: Kelvin = Field(alias="temperature")
    tolerance_k: Kelvin = Field(alias="tolerance")
    window_s: Seconds = Field(alias="window")
    timeout_s: Seconds = Field(alias="timeout")
    on_timeout: Literal["continue", "park"]


class Ladder(Strict):
    """One field sweep repeated at each of a list of temperatures, each settled first."""

    kind: Literal["ladder"]
    name: StepName
    temperatures_k: Annotated[list[Kelvin], Field(min_length=1, max_length=200)] = Field(
        alias="temperatures"
    )
    tolerance_k: Kelvin = Field(alias="tolerance")
    window_s: Seconds = Field(alias="window")
    timeout_s: Seconds = Field(alias="timeout")
    on_timeout: Literal["continue", "park"]
    sweep: FieldSweep


Step = Annotated[FieldSweep | Settle | Ladder, Field(discriminator="kind")]


class AboutSequence(Strict):
    """What the sequence is called."""

    name: StepName
    description: str = ""


class Sequence(Strict):
    """What to do in a night; SI floats throughout. Every night ends by parking the rig."""

    about: AboutSequence = Field(alias="sequence")
    prior: Prior
    steps: Annotated[list[Step], Field(min_length=1)] = Field(alias="step")


def load_sequence(path: str | Path, rig: Rig, rig_document: Document) -> tuple[Sequence, Document]:
    """Read a sequence file and check it against the rig. Raises ConfigError."""
    document = read_document(path)
    sequence = build(Sequence, document)
    names: set[str] = set()
    for key, step in _with_places(sequence):
        if isinstance(step, FieldSweep) and step.from_t == step.to_t:
            raise document.refuse(
                (*key, "to"),
                "is where the sweep begins; the field would not move",
                value=f"{step.to_t:g} T",
                allowed=f"another field than {step.from_t:g} T",
            )
        if step.name in names:
            raise document.refuse(
                (*key, "name"),
                "stands twice",
                value=f'"{step.name}"',
                allowed="a name of its own",
            )
        names.add(step.name)
        for place, value, unit, least, most, limit in _limits(key, step, rig):
            if not least <= value <= most:
                raise document.refuse(
                    place,
                    f"lies outside the rig's limit in {rig_document.where(*limit)}",
                    value=f"{value:g} {unit}",
                    allowed=f"{least:g} {unit} to {most:g} {unit}",
                )
    return sequence, document


def _with_places(sequence: Sequence) -> Iterator[tuple[Key, FieldSweep | Settle | Ladder]]:
    for index, step in enumerate(sequence.steps):
        yield ("step", index), step
        if isinstance(step, Ladder):
            yield ("step", index, "sweep"), step.sweep


_Limit = tuple[Key, float, str, float, float, Key]


def _limits(key: Key, step: FieldSweep | Settle | Ladder, rig: Rig) -> Iterator[_Limit]:
    """Each value of a step that the rig bounds: place, value, unit, range, the limit's place."""
    if isinstance(step, FieldSweep):
        most = rig.magnet.field_max_t
        for end, value in (("from", step.from_t), ("to", step.to_t)):
            yield (*key, end), value, "T", -most, most, ("magnet", "field_max")
        return
    places: list[tuple[Key, float]] = (
        [((*key, "temperature"), step.temperature_k)]
        if isinstance(step, Settle)
        else [((*key, "temperatures", at), one) for at, one in enumerate(step.temperatures_k)]
    )
    least, most = rig.stage.temperature_min_k, rig.stage.temperature_max_k
    for place, value in places:
        limit = ("stage", "temperature_max" if value > most else "temperature_min")
        yield place, value, "K", least, most, limit
