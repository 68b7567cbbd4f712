"""The text of a dialect file, and errors that say where in it something is wrong."""

import re
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

Key = tuple[str | int, ...]

_HEADER = re.compile(r"^\s*(\[\[?)\s*([\w.\- ]+?)\s*\]\]?\s*(?:#.*)?$")
_PAIR = re.compile(r"^\s*([\w\-]+(?:\s*\.\s*[\w\-]+)*)\s*=")


class DialectError(Exception):
    """Something is wrong in a dialect file.

    Attributes
    ----------
    file : str
    line : int or None
        Of the key, or of the table around it.
    key, value : str or None
        Where, and what stands there.
    problem, cure : str
        What is wrong, and what to do about it.
    """

    def __init__(
        self,
        file: str,
        problem: str,
        *,
        line: int | None = None,
        key: str | None = None,
        value: str | None = None,
        cure: str,
    ) -> None:
        self.file, self.problem, self.cure = file, problem, cure
        self.line, self.key, self.value = line, key, value
        super().__init__(file, problem)

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}, line {self.line}"
        key = f": {self.key}" if self.key else ""
        value = f" = {self.value}" if self.value is not None else ""
        return f"{place}{key}{value}: {self.problem}; {self.cure}"


@dataclass(frozen=True)
class DialectText:
    """A file's name and text."""

    file: str
    text: str

    def parsed(self) -> dict[str, Any]:
        """The TOML data. Raises DialectError."""
        try:
            return tomllib.loads(self.text)
        except (tomllib.TOMLDecodeError, RecursionError) as error:
            found = re.search(r"at line (\d+)", str(error))
            raise DialectError(
                self.file,
                f"is not valid TOML: {error}",
                line=int(found[1]) if found else None,
                cure="correct the line",
            ) from None

    def error(
        self, problem: str, key: Key, *, cure: str, value: object | None = None
    ) -> DialectError:
        """An error at a key."""
        shown = None if value is None else repr(value)
        return DialectError(
            self.file,
            problem,
            line=self.line_of(key),
            key=_key_text(key),
            value=shown[:80] if shown else None,
            cure=cure,
        )

    def line_of(self, key: Key) -> int | None:
        """Line of a key, or of the nearest table around it."""
        lines = self._lines()
        while key:
            if key in lines:
                return lines[key]
            key = key[:-1]
        return None

    def _lines(self) -> dict[Key, int]:
        lines: dict[Key, int] = {}
        counts: dict[str, int] = {}
        table: Key = ()
        for number, row in enumerate(self.text.splitlines(), 1):
            if header := _HEADER.match(row):
                path = header[2]
                table = tuple(part.strip() for part in path.split("."))
                if header[1] == "[[":
                    counts[path] = counts.get(path, -1) + 1
                    lines.setdefault(table, number)
                    table = (*table, counts[path])
                lines.setdefault(table, number)
            elif pair := _PAIR.match(row):
                key = (*table, *(part.strip() for part in pair[1].split(".")))
                lines.setdefault(key, number)
        return lines


def read_text(path: Path) -> DialectText:
    """Read a dialect file. Raises DialectError."""
    try:
        return DialectText(str(path), path.read_text(encoding="utf-8"))
    except UnicodeDecodeError as error:
        raise DialectError(
            str(path), f"is not UTF-8 text (byte {error.start})", cure="save it as UTF-8"
        ) from None
    except OSError as error:
        raise DialectError(
            str(path), f"cannot be read: {error.strerror}", cure="correct the path"
        ) from None


def _key_text(key: Key) -> str:
    text = ""
    for part in key:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if text else part
    return text
