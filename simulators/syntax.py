"""Program messages of IEEE 488.2 as text: units, headers, numbers with suffixes, booleans."""

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass

from simulators.status import Refused

_HEADER = re.compile(r"(\*[A-Za-z]+|:?[A-Za-z]\w*(?::[A-Za-z]\w*)*)(\??)", re.ASCII)
_NUMBER = re.compile(r"([+-]?(?:(\d+)\.?(\d*)|\.(\d+)))(?:[eE] ?([+-]?\d+))?", re.ASCII)
_SUFFIX = re.compile(r"[A-Za-z][A-Za-z0-9/.\-]*", re.ASCII)
_BASED = re.compile(r"#(?:[hH]([0-9A-Fa-f]+)|[qQ]([0-7]+)|[bB]([01]+))", re.ASCII)
_WORD = re.compile(r"[A-Za-z]\w*", re.ASCII)
_NONZERO = frozenset("123456789")

WHITE = "".join(chr(code) for code in range(33) if code != 10)
"""White space of IEEE 488.2 7.4.1.2: ASCII 0 to 9 and 11 to 32 (from memory)."""

_MULTIPLIERS = {
    "EX": 1e18, "PE": 1e15, "G": 1e9, "MA": 1e6, "K": 1e3, "": 1.0,
    "M": 1e-3, "U": 1e-6, "N": 1e-9, "P": 1e-12, "F": 1e-15, "A": 1e-18,
}  # fmt: skip
_TIMES = {"S": 1.0, "MIN": 60.0, "H": 3600.0}


def suffixes(unit: str) -> dict[str, float]:
    """Suffixes that a parameter of a unit takes, with their factors.

    Parameters
    ----------
    unit : str
        ``"T"``, ``"K/S"``, ``"HZ"``, ...; empty for a parameter without unit.

    Returns
    -------
    dict
        Upper-case suffix to factor. In ``HZ``, ``M`` is mega (IEEE 488.2, from memory); an angle
        in ``RAD`` may be in ``DEG``.
    """
    if not unit:
        return {}
    base, _, per = unit.partition("/")
    scaled = {multiplier + base: factor for multiplier, factor in _MULTIPLIERS.items()}
    if base == "HZ":
        scaled["MHZ"] = 1e6
    if base == "RAD":
        scaled["DEG"] = math.pi / 180
    if not per:
        return scaled
    return {
        f"{name}/{time}": factor / seconds
        for name, factor in scaled.items()
        for time, seconds in _TIMES.items()
    }


@dataclass(frozen=True, slots=True)
class Unit:
    """One program message unit: its header as written, a question mark or not, its parameters."""

    header: str
    query: bool
    parameters: tuple[str, ...]


def _split(text: str, separator: str) -> Iterator[str]:
    """Split outside quotes and blocks; a string that does not end is -151, a block -161."""
    quote, start, block_end = "", 0, 0
    for i, char in enumerate(text):
        if i < block_end:
            continue
        if quote:
            quote = "" if char == quote else quote
        elif char in "\"'":
            quote = char
        elif char == "#" and (length := _block_length(text, i)):
            block_end = i + length
            if block_end > len(text):
                raise Refused(-161, "block without end")
        elif char == separator:
            yield text[start:i]
            start = i + 1
    if quote:
        raise Refused(-151, "string without end")
    yield text[start:]


def _block_length(text: str, start: int) -> int:
    """Characters of a definite length block that begins here with its ``#``; 0 if none does.

    One whose own length is not there yet counts as one character longer than the text.
    """
    digits = text[start + 1 : start + 2]
    if digits not in _NONZERO:
        return 0
    first = start + 2 + int(digits)
    length = text[start + 2 : first]
    if len(length) < int(digits):
        return len(text) - start + 1 if not length or length.isdecimal() else 0
    return first - start + int(length) if length.isascii() and length.isdecimal() else 0


def inside_block(text: str) -> bool:
    """Whether a message ends inside a definite length block, so that a line end belongs to it."""
    at, quote = 0, ""
    while at < len(text):
        char = text[at]
        if quote:
            quote = "" if char == quote else quote
        elif char in "\"'":
            quote = char
        elif char == "#" and (length := _block_length(text, at)):
            if at + length > len(text):
                return True
            at += length
            continue
        at += 1
    return False


def units(message: str) -> Iterator[Unit]:
    """Take a program message apart.

    Raises
    ------
    Refused
        A command error, at the unit where it is met.
    """
    empty = False
    for text in _split(message, ";"):
        if empty:
            raise Refused(-102, "nothing between separators")
        if stripped := text.strip(WHITE):
            yield _unit(stripped)
        else:
            empty = True  # let pass at the end of a message only


def _unit(text: str) -> Unit:
    match = _HEADER.match(text)
    if not match:
        raise _bad_character(text[0], text)
    rest = text[match.end() :]
    if rest and rest[0] not in WHITE:
        raise _bad_character(rest[0], text)
    rest = rest.strip(WHITE)
    parameters = tuple(p.strip(WHITE) for p in _split(rest, ",")) if rest else ()
    if "" in parameters:
        raise Refused(-109, "nothing between commas") if len(parameters) > 1 else Refused(-102)
    return Unit(match[1], bool(match[2]), parameters)


def _bad_character(char: str, text: str) -> Refused:
    shown = printable(text)
    if not char.isascii() or not char.isprintable():
        return Refused(-101, shown)
    if char == ",":
        return Refused(-103, shown)
    known = char.isalnum() or char in ":*?;\"'#()+-./="
    return Refused(-102 if known else -101, shown)


def printable(text: str) -> str:
    """At most 40 characters, fit to stand in a quoted string of plain ASCII."""
    return "".join(c if c.isascii() and c.isprintable() and c != '"' else "." for c in text[:40])


def number(text: str, factors: dict[str, float]) -> float:
    """Value of a numeric parameter, with its suffix applied.

    Raises
    ------
    Refused
        -121, -123, -124, -131, -138, -141, -158, -102.
    """
    match = _NUMBER.match(text)
    if match:
        if len("".join(g or "" for g in match.groups()[1:4]).lstrip("0")) > 255:
            raise Refused(-124)
        exponent = match[5] or "0"
        if len(exponent.lstrip("+-0")) > 5 or abs(int(exponent)) > 32000:
            raise Refused(-123)
        value = float(f"{match[1]}e{exponent}")
        return _scaled(value, _factor(text[match.end() :].strip(WHITE), factors))
    if based := _BASED.fullmatch(text):
        digits = next(g for g in based.groups() if g)
        if len(digits) > 255:
            raise Refused(-124)
        return float(int(digits, {"H": 16, "Q": 8, "B": 2}[text[1].upper()]))
    raise not_expected(text, numeric=True)


def _scaled(value: float, factor: float) -> float:
    """Value times factor; 10 UV is 1e-5 to the last bit, as a small factor is divided by."""
    inverse = round(1.0 / factor)
    return (
        value / inverse if inverse > 1 and math.isclose(inverse * factor, 1.0) else value * factor
    )


def _factor(suffix: str, factors: dict[str, float]) -> float:
    if not suffix:
        return 1.0
    if not _SUFFIX.fullmatch(suffix):
        raise Refused(-121, printable(suffix))
    if not factors:
        raise Refused(-138, printable(suffix))
    try:
        return factors[suffix.upper()]
    except KeyError:
        raise Refused(-131, printable(suffix)) from None


def not_expected(text: str, numeric: bool = False) -> Refused:
    """Error for a parameter of the wrong kind."""
    if _block_length(text, 0):
        return Refused(-168)
    if text[0] in "\"'":
        return Refused(-158)
    if _WORD.fullmatch(text):
        return Refused(-141, printable(text))
    if text[0] in "+-.#" or text[0].isdigit():
        return Refused(-121, printable(text)) if numeric else Refused(-128, printable(text))
    if not text.isascii() or not text.isprintable():
        return Refused(-101, printable(text))
    return Refused(-104, printable(text))


def nr3(value: float) -> str:
    """A number as the instruments answer it: ten significant digits with an exponent."""
    if math.isnan(value):
        return "9.91E+37"
    if math.isinf(value):
        return "9.9E+37" if value > 0 else "-9.9E+37"
    return f"{value:.9E}"


def boolean(text: str) -> bool:
    """ON, OFF or a number that rounds to zero or not."""
    word = text.upper()
    if word in {"ON", "1"}:
        return True
    if word in {"OFF", "0"}:
        return False
    value = number(text, {})
    if not math.isfinite(value):
        raise Refused(-222, printable(text))
    return round(value) != 0
