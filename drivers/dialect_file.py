"""The tables and keys of a dialect file, typed; unknown keys are errors."""

import math
import re
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, ConfigDict, Field

from drivers.kinds import Kind

_FORM = re.compile(r"d|\.\d{1,2}[eEfFgG]")


class _Strict(BaseModel):
    model_config = ConfigDict(
        extra="forbid", strict=True, frozen=True, allow_inf_nan=False, populate_by_name=False
    )


def _message(text: str) -> str:
    if not text or not text.isascii() or not text.isprintable():
        raise ValueError("must be printable ASCII text, without a line end")
    return text


def _command(text: str) -> str:
    if text.count("{value}") != 1:
        raise ValueError("must contain {value} once")
    return _message(text)


def _line_end(text: str) -> str:
    if text not in {"\n", "\r\n", "\r"}:
        raise ValueError('must be "\\n", "\\r\\n" or "\\r"')
    return text


def _pattern(text: str) -> str:
    try:
        re.compile(text)
    except re.error as error:
        raise ValueError(f"is no regular expression: {error}") from None
    return text


def _form(text: str) -> str:
    if not _FORM.fullmatch(text):
        raise ValueError('must be "d" or like ".9E", ".4f", ".6g"')
    return text


def _codes(codes: dict[str, float]) -> dict[str, float]:
    if len(codes) < 2 or len(set(codes.values())) < len(codes):
        raise ValueError("must have at least two codes, all of different values")
    return codes


def _nonzero(value: float) -> float:
    if value == 0:
        raise ValueError("must not be zero")
    return value


Message = Annotated[str, AfterValidator(_message)]
LineEnd = Annotated[str, AfterValidator(_line_end)]


class DialectSection(_Strict):
    """What holds for the whole instrument."""

    kind: Kind
    description: str = ""
    joins: Literal["", ";", ","] = ""
    write_end: LineEnd = "\n"
    read_end: LineEnd = "\n"
    pause_s: Annotated[float, Field(ge=0, le=10)] = 0.0


class IdentitySection(_Strict):
    """The query whose answer never changes, and the shape of that answer."""

    query: Message
    pattern: Annotated[str, AfterValidator(_pattern)] = ".*"


class ErrorsSection(_Strict):
    """The query that takes one entry out of the error queue; what it begins with if empty."""

    query: Message
    none: str


class SerialSection(_Strict):
    """Settings of a serial port."""

    baud_rate: Annotated[int, Field(ge=50, le=4_000_000)] = 9600
    data_bits: Literal[7, 8] = 8
    parity: Literal["none", "even", "odd"] = "none"
    stop_bits: Literal[1, 2] = 1


class ReadSection(_Strict):
    """One query, and the shape of its reply."""

    query: Message
    reply: Message


class Spelling(_Strict):
    """How a value is spelled on the wire."""

    unit: str = ""
    factor: Annotated[float, AfterValidator(_nonzero)] = 1.0
    codes: Annotated[dict[str, float], AfterValidator(_codes)] | None = None
    on: Message | None = None
    off: Message | None = None
    bit: Annotated[int, Field(ge=0, le=63)] | None = None
    inverted: bool = False


class ValueSection(Spelling):
    """A value that is read."""

    source: str | None = Field(default=None, alias="from")
    always: float | bool | None = None


class SettingSection(Spelling):
    """A setting: its command, and the query that reads it back."""

    command: Annotated[str, AfterValidator(_command)]
    query: Message
    reply: Message = "{value}"
    reads_on: Message | None = None
    reads_off: Message | None = None
    joined: bool = True
    form: Annotated[str, AfterValidator(_form)] = ".9E"
    least: float = Field(default=-math.inf, validate_default=False)
    most: float = Field(default=math.inf, validate_default=False)


class DialectFile(_Strict):
    """A whole file."""

    dialect: DialectSection
    identity: IdentitySection
    errors: ErrorsSection | None = None
    serial: SerialSection | None = None
    read: Annotated[list[ReadSection], Field(min_length=1)]
    values: dict[str, ValueSection]
    set: dict[str, SettingSection] = Field(default_factory=dict)


def serial_attributes(serial: SerialSection | None) -> dict[str, Any]:
    """PyVISA attributes of a serial port; empty if the dialect does not speak of one."""
    if serial is None:
        return {}
    from pyvisa import constants

    return {
        "baud_rate": serial.baud_rate,
        "data_bits": serial.data_bits,
        "parity": constants.Parity[serial.parity],
        "stop_bits": constants.StopBits.one if serial.stop_bits == 1 else constants.StopBits.two,
    }
