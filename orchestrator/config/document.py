"""A TOML file with the line of every key, so that an error can say where it stands."""

import re
import tomllib
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

Key = tuple[str | int, ...]

_MOST = 12  # further problems that are told at once

_BARE = r'(?:[A-Za-z0-9_-]+|"(?:[^"\\]|\\.)*"|\'[^\']*\')'
_DOTTED = rf"{_BARE}(?:\s*\.\s*{_BARE})*"
_HEADER = re.compile(rf"^\s*(\[\[?)\s*({_DOTTED})\s*\]\]?\s*(?:#.*)?$")
_PAIR = re.compile(rf"^\s*({_DOTTED})\s*=\s*")


class ConfigError(Exception):
    """Something is wrong in a file that a person wrote.

    Attributes
    ----------
    path, line, key, value, allowed
        Where it stands, what was found there, and what may stand there. ``line`` and ``key`` are
        None where the file as a whole is meant.
    others : tuple of ConfigError
        What else is wrong in the same file, as far as it is known; told below the first.
    """

    def __init__(
        self,
        path: str,
        problem: str,
        *,
        line: int | None = None,
        key: str | None = None,
        value: str | None = None,
        allowed: str | None = None,
        others: "tuple[ConfigError, ...]" = (),
    ) -> None:
        self.others = others
        self.path, self.problem = path, problem
        self.line, self.key, self.value, self.allowed = line, key, value, allowed
        super().__init__(str(self))

    def __str__(self) -> str:
        place = self.path if self.line is None else f"{self.path}, line {self.line}"
        subject = f": {self.key}" if self.key else ""
        given = f" = {self.value}" if self.value is not None else ""
        allowed = f" (allowed: {self.allowed})" if self.allowed else ""
        first = f"{place}{subject}{given}: {self.problem}{allowed}"
        lines = [first, *map(str, self.others[:_MOST])]
        if len(self.others) > _MOST:
            lines.append(f"and {len(self.others) - _MOST} more")
        return "\n".join(lines)


@dataclass(frozen=True)
class Document:
    """The text of one file, its data, and the lines of its keys."""

    path: str
    text: str
    data: dict[str, Any]
    lines: dict[Key, int] = field(repr=False)

    def line_of(self, key: Key) -> int | None:
        """Line of the key, or of the nearest table around it; None for the file as a whole."""
        while key:
            for place in (key, (*key, 0)):  # a list of tables stands where its first one does
                if place in self.lines:
                    return self.lines[place]
            key = key[:-1]
        return None

    def where(self, *key: str | int) -> str:
        """``"rig.toml, line 12 (magnet.field_max)"``, for messages that defer to a file."""
        line = self.line_of(key)
        place = self.path if line is None else f"{self.path}, line {line}"
        return f"{place} ({key_text(key)})"

    def refuse(
        self, key: Key, problem: str, *, value: str | None = None, allowed: str | None = None
    ) -> ConfigError:
        """The error that says what is wrong at a key of this file; the caller raises it."""
        return ConfigError(
            self.path,
            problem,
            line=self.line_of(key),
            key=key_text(key),
            value=value,
            allowed=allowed,
        )


def key_text(key: Key) -> str:
    """``("step", 0, "to")`` as a person counts: ``step[1].to``."""
    text = ""
    for part in key:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if text else part
    return text


def read_document(path: str | Path) -> Document:
    """Read a TOML file. Raises ConfigError if it is absent, not UTF-8, or not TOML."""
    name = str(path)
    try:
        text = Path(path).read_text(encoding="utf-8")
    except UnicodeDecodeError as error:
        raise ConfigError(name, f"is not UTF-8 text (byte {error.start})") from None
    except OSError as error:
        raise ConfigError(name, f"cannot be read: {error.strerror}") from None
    return parse_document(name, text)


def parse_document(name: str, text: str) -> Document:
    """Parse the text of a TOML file called ``name``."""
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        found = re.search(r"^(.*?) \(at line (\d+), column \d+\)$", str(error), re.S)
        problem, line = (found[1], int(found[2])) if found else (str(error), None)
        if "overwrite a value" in problem.lower():
            problem = "the key or table stands twice"
        raise ConfigError(name, f"is not valid TOML: {problem}", line=line) from None
    except RecursionError:
        raise ConfigError(name, "is nested too deeply") from None
    return Document(name, text, data, _lines_of(text))


def _parts(dotted: str) -> Key:
    return tuple(part.strip("\"'") for part in re.findall(_BARE, dotted))


def _lines_of(text: str) -> dict[Key, int]:
    lines: dict[Key, int] = {}
    counts: dict[Key, int] = {}
    table: Key = ()
    rows = text.splitlines()
    number = 0
    while number < len(rows):
        row = rows[number]
        header, pair = _HEADER.match(row), _PAIR.match(row)
        if header:
            table = _resolve(_parts(header[2]), counts, array=header[1] == "[[")
            lines.setdefault(table, number + 1)
        elif pair:
            key = table + _parts(pair[1])
            lines.setdefault(key, number + 1)
            number = _walk_value(rows, number, pair.end(), key, lines)
        number += 1
    return lines


def _resolve(parts: Key, counts: dict[Key, int], *, array: bool) -> Key:
    """The path of a table header with the running index of each array of tables in it."""
    path: Key = ()
    for index, part in enumerate(parts):
        path += (part,)
        if array and index == len(parts) - 1:
            counts[path] = counts.get(path, -1) + 1
        if path in counts:
            path += (counts[path],)
    return path


def _walk_value(rows: list[str], number: int, column: int, key: Key, lines: dict[Key, int]) -> int:
    """Step over one value, noting the line of each element of a top-level array; its last row."""
    depth, element, fresh, quote = 0, -1, False, ""
    while number < len(rows):
        tokens = _tokens(rows[number], column, quote)
        quote = ""
        for token in tokens:
            if token[0] in "\"'":
                quote = token
                continue
            if fresh and token != "]":
                element, fresh = element + 1, False
                lines.setdefault((*key, element), number + 1)
            depth += (token in "[{") - (token in "]}")
            fresh = fresh or (token == "[" and depth == 1) or (token == "," and depth == 1)
        if depth <= 0 and len(quote) != 3:
            return number
        number, column = number + 1, 0
    return number


_STRING = re.compile(
    r'"""(?:[^"\\]|\\.|"(?!""))*"""'
    r"|'''(?:(?!''').)*'''"
    r'|(?<!")(?!""")"(?:[^"\\]|\\.)*"'
    r"|(?<!')(?!''')'[^']*'"
)


def _tokens(row: str, column: int, quote: str) -> list[str]:
    """Brackets, commas and words (as ``w``) of a row; last, the quote that it leaves open.

    ``quote`` is the quote that the row before left open.
    """
    rest = quote + row[column:]
    words = _STRING.sub("w", rest)
    cut = re.search(r"#|\"\"\"|'''", words)
    opened = cut[0] if cut and cut[0] != "#" else ""
    plain = words[: cut.start()] if cut else words
    tokens = [char if char in "[]{}," else "w" for char in plain if not char.isspace()]
    return [*tokens, "w", opened] if opened else tokens
