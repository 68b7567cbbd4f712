"""Bounded quantities as pydantic types: text with a unit in the file, an SI float in the model."""

from dataclasses import dataclass
from typing import Any

from pydantic import BaseModel, ConfigDict, GetCoreSchemaHandler
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from orchestrator.units import UnitError, to_si


@dataclass(frozen=True)
class Quantity:
    """Annotation of a float: the unit it is converted to, and the range it must lie in.

    ``Annotated[float, Quantity("T", above=0, most=45)]`` takes ``"12 T"`` or ``"120 kG"``.
    """

    unit: str
    least: float | None = None
    above: float | None = None
    most: float | None = None

    @property
    def allowed(self) -> str:
        """The range in words, for messages."""
        per_minute = self.unit in ("T/s", "K/s")  # as the trade quotes them
        scale, name = (60.0, f"{self.unit[0]}/min") if per_minute else (1.0, self.unit)
        unit = "" if name == "1" else f" {name}"
        low = (
            f"above {scale * self.above:g}{unit}"
            if self.above is not None
            else f"{scale * self.least:g}{unit}"
            if self.least is not None
            else None
        )
        high = None if self.most is None else f"{scale * self.most:g}{unit}"
        if low and high:
            return f"{low} to {high}"
        if low:
            return low if self.above is not None else f"{low} or more"
        if high:
            return f"{high} or less"
        return f"any number{' in' + unit if unit else ''}"

    def parse(self, given: object) -> float:
        try:
            value = to_si(given, self.unit)
        except UnitError as error:
            raise PydanticCustomError(
                "quantity", "{problem}", {"problem": str(error), "allowed": self.allowed}
            ) from None
        outside = (
            (self.least is not None and value < self.least)
            or (self.above is not None and value <= self.above)
            or (self.most is not None and value > self.most)
        )
        if outside:
            raise PydanticCustomError(
                "quantity", "is outside what is allowed", {"allowed": self.allowed}
            )
        return value

    def __get_pydantic_core_schema__(
        self, source: Any, handler: GetCoreSchemaHandler
    ) -> CoreSchema:
        return core_schema.no_info_plain_validator_function(self.parse)


class Strict(BaseModel):
    """Base of every model of a file: frozen, no unknown keys, keys as the file spells them."""

    model_config = ConfigDict(frozen=True, extra="forbid", strict=True, validate_default=False)
