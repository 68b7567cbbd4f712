"""How one value is spelled on the wire: numbers, coded numbers, switches, bits."""

import math
import re
from dataclasses import dataclass
from typing import Protocol

from drivers.errors import NotANumber

Value = float | bool

_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_NO_NUMBER = re.compile(r"[+-]?(?:nan|inf|infinity|ninf)", re.IGNORECASE)
_NO_NUMBER_LEAST = 9.89e37


def number(text: str) -> float:
    """A decimal number as IEEE 488.2 spells it (NR1, NR2 or NR3).

    Raises
    ------
    NotANumber
        For nan and infinity, also spelled 9.91E37 and 9.9E37 (SCPI-1999, from memory).
    ValueError
        For anything else that is no number.
    """
    text = text.strip()
    if not _NUMBER.fullmatch(text):
        if _NO_NUMBER.fullmatch(text):
            raise NotANumber(f"{text!r} is not a number")
        raise ValueError(f"{text!r} is not a number")
    value = float(text)
    if not abs(value) < _NO_NUMBER_LEAST:
        raise NotANumber(f"{text!r} stands for not-a-number or infinity")
    return value


class Wording(Protocol):
    """Spells a value for the wire, and reads it back."""

    def decode(self, text: str) -> Value:
        """Raises ValueError for text that is no such value."""
        ...

    def encode(self, value: Value) -> str:
        """Raises ValueError for a value that cannot be sent."""
        ...


@dataclass(frozen=True, slots=True)
class Number:
    """A decimal number in a unit.

    Attributes
    ----------
    factor : float
        Wire to SI.
    form : str
        Format specification, such as ``".9E"`` or ``"d"``.
    least, most : float
        Range on the wire.
    unit : str
        For messages.
    """

    factor: float
    form: str = ".9E"
    least: float = -math.inf
    most: float = math.inf
    unit: str = ""

    def decode(self, text: str) -> float:
        """SI."""
        return number(text) * self.factor

    def encode(self, value: Value) -> str:
        """From SI."""
        wire = float(value) / self.factor
        unit = "" if self.unit in {"", "1"} else f" {self.unit}"
        if not math.isfinite(wire):
            raise ValueError(f"{value!r} cannot be sent: it is not finite")
        if not self.least <= wire <= self.most:
            raise ValueError(f"{wire:.9g}{unit} is outside {self.least:g} to {self.most:g}{unit}")
        if self.form != "d":
            return format(wire, self.form)
        if abs(wire - round(wire)) > 1e-6:
            raise ValueError(f"{wire:.9g}{unit} is not a whole number")
        return str(round(wire))


@dataclass(frozen=True, slots=True)
class Coded:
    """A number out of a table, sent as its code.

    Attributes
    ----------
    codes : dict
        Code to value, SI.
    """

    codes: dict[str, float]

    def decode(self, text: str) -> float:
        """SI. A code may come in another spelling of the same number."""
        text = text.strip()
        if text in self.codes:
            return self.codes[text]
        wanted = number(text)
        for code, value in self.codes.items():
            if _NUMBER.fullmatch(code) and float(code) == wanted:
                return value
        raise ValueError(f"{text!r} is none of the codes {', '.join(self.codes)}")

    def encode(self, value: Value) -> str:
        """The code of a value that is in the table, to 1e-6."""
        for code, known in self.codes.items():
            if math.isclose(float(value), known, rel_tol=1e-6, abs_tol=1e-300):
                return code
        choices = ", ".join(f"{known:g}" for known in sorted(self.codes.values()))
        raise ValueError(f"{value:g} is not offered by the instrument, which has {choices}")


@dataclass(frozen=True, slots=True)
class Switch:
    """On or off, as two words."""

    on: str = "1"
    off: str = "0"

    def decode(self, text: str) -> bool:
        """True for on. The words in any case, or the same number in another spelling."""
        text = text.strip()
        for word, value in ((self.on, True), (self.off, False)):
            if text.lower() == word.lower():
                return value
            if _NUMBER.fullmatch(word) and _NUMBER.fullmatch(text) and float(word) == float(text):
                return value
        raise ValueError(f"{text!r} is neither {self.on!r} nor {self.off!r}")

    def encode(self, value: Value) -> str:
        """The word."""
        if not isinstance(value, bool):
            raise ValueError(f"{value!r} is neither True nor False")
        return self.on if value else self.off


@dataclass(frozen=True, slots=True)
class Bit:
    """One bit of an integer; read only.

    Attributes
    ----------
    bit : int
        0 is the lowest.
    inverted : bool
        Whether 0 means true.
    """

    bit: int
    inverted: bool = False

    def decode(self, text: str) -> bool:
        """Whether the flag is up."""
        value = number(text)
        if value != int(value) or value < 0:
            raise ValueError(f"{text!r} is not a register's value")
        return bool(int(value) >> self.bit & 1) != self.inverted

    def encode(self, value: Value) -> str:
        """Never."""
        raise ValueError("a bit of a register cannot be written")


@dataclass(frozen=True, slots=True)
class TwoWays:
    """A value that is sent in one wording and read back in another."""

    sent: Wording
    read: Wording

    def decode(self, text: str) -> Value:
        """As it is read."""
        return self.read.decode(text)

    def encode(self, value: Value) -> str:
        """As it is sent."""
        return self.sent.encode(value)


@dataclass(frozen=True, slots=True)
class Always:
    """A value that the instrument has no word for, and that is always the same."""

    value: Value

    def decode(self, text: str) -> Value:
        """The value."""
        return self.value

    def encode(self, value: Value) -> str:
        """Never."""
        raise ValueError(f"it is always {self.value}")
