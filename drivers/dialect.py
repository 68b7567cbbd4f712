"""A dialect: how one model of instrument spells each capability, as data in a TOML file."""

import importlib.resources
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, get_args

from pydantic import ValidationError

from drivers.dialect_checks import check_meaning
from drivers.dialect_file import DialectFile, SettingSection, Spelling, ValueSection
from drivers.dialect_text import DialectError, DialectText, read_text
from drivers.kinds import FLAG, VOCABULARIES, Kind
from drivers.phrases import Look, Question, Setting, Template
from drivers.wire_units import factor_to_si
from drivers.wordings import Always, Bit, Coded, Number, Switch, TwoWays, Wording

__all__ = ["Dialect", "DialectError", "load_dialect", "shipped_dialects"]


@dataclass(frozen=True)
class Dialect:
    """A dialect that has been read and checked.

    Attributes
    ----------
    name : str
        Name of a shipped one, or path of the file.
    kind : str
        ``"magnet"``, ``"temperature"``, ``"lockin"`` or ``"gauge"``.
    lacks : tuple of str
        Settings of the kind that the instrument cannot be given.
    """

    name: str
    kind: Kind
    lacks: tuple[str, ...]
    content: DialectFile = field(repr=False)
    _text: DialectText = field(repr=False)

    def look(self, coil_constant_t_per_a: float | None = None) -> Look:
        """What to ask in one look at the instrument.

        Parameters
        ----------
        coil_constant_t_per_a : float, optional
            T/A, for supplies that speak of field as current.

        Raises
        ------
        DialectError
            The coil constant is needed and missing.
        """
        content, quantities = self.content, VOCABULARIES[self.kind].values
        questions, always = [], {}
        wordings: dict[str, Wording] = {}
        for name, section in content.values.items():
            key = ("values", name)
            wordings[name] = self._wording(key, section, quantities[name], coil_constant_t_per_a)
            if section.always is not None:
                always[name] = section.always
        for read in content.read:
            template = Template.of(read.reply)
            found = tuple(
                (name, section.source or name, wordings[name])
                for name, section in content.values.items()
                if section.always is None and (section.source or name) in template.names
            )
            questions.append(Question(read.query, template, found))
        return Look(tuple(questions), content.dialect.joins, always)

    def settings(self, coil_constant_t_per_a: float | None = None) -> dict[str, Setting]:
        """What can be written, by name. Parameters and errors as in `look`."""
        quantities = VOCABULARIES[self.kind].settings
        settings = {}
        for name, section in self.content.set.items():
            wording = self._wording(("set", name), section, quantities[name], coil_constant_t_per_a)
            question = Question(
                section.query, Template.of(section.reply), (("value", "value", wording),)
            )
            joins = self.content.dialect.joins if section.joined else ""
            settings[name] = Setting(section.command, question, wording, joins)
        return settings

    def _wording(
        self, key: tuple[str, str], section: Spelling, quantity: str, coil: float | None
    ) -> Wording:
        if isinstance(section, ValueSection) and section.always is not None:
            return Always(section.always)
        if quantity == FLAG:
            return _flag(section)
        try:
            factor = factor_to_si(quantity, section.unit, coil) * section.factor
        except ValueError as error:
            raise self._text.error(
                str(error),
                (*key, "unit"),
                value=section.unit,
                cure="give the magnet's coil_constant in the rig file",
            ) from None
        if section.codes is not None:
            return Coded({code: value * factor for code, value in section.codes.items()})
        if isinstance(section, SettingSection):
            return Number(factor, section.form, section.least, section.most, section.unit)
        return Number(factor)


def _flag(section: Spelling) -> Wording:
    switch = Switch(section.on or "1", section.off or "0")
    bit = None if section.bit is None else Bit(section.bit, section.inverted)
    if not isinstance(section, SettingSection):
        return bit or switch
    if bit is not None:
        return TwoWays(switch, bit)
    if section.reads_on is not None and section.reads_off is not None:
        return TwoWays(switch, Switch(section.reads_on, section.reads_off))
    return switch


def shipped_dialects() -> list[str]:
    """Names of the dialects that come with the program."""
    folder = importlib.resources.files("drivers") / "dialects"
    return sorted(
        entry.name.removesuffix(".toml")
        for entry in folder.iterdir()
        if entry.name.endswith(".toml")
    )


def load_dialect(name_or_path: str | Path) -> Dialect:
    """Read and check a dialect.

    Parameters
    ----------
    name_or_path : str or Path
        Name of a shipped dialect, or path of a TOML file (it ends in ``.toml``).

    Raises
    ------
    DialectError
        With file, line, key, value, and what to do about it.
    """
    name = str(name_or_path)
    if not name.endswith(".toml"):
        if name not in shipped_dialects():
            raise DialectError(
                name,
                "there is no dialect of this name",
                cure=f"use one of {', '.join(shipped_dialects())}, or the path of a .toml file",
            )
        resource = importlib.resources.files("drivers") / "dialects" / f"{name}.toml"
        text = DialectText(f"{name}.toml", resource.read_text(encoding="utf-8"))
    else:
        text = read_text(Path(name_or_path))
    return parse_dialect(name, text)


def parse_dialect(name: str, text: DialectText) -> Dialect:
    """Check the text of a dialect. Raises DialectError."""
    data = text.parsed()
    try:
        content = DialectFile.model_validate(data)
    except ValidationError as error:
        raise _first_error(text, error) from None
    kind: Kind = content.dialect.kind
    words = VOCABULARIES[kind]
    check_meaning(text, content, words)
    lacks = tuple(name for name in words.settings if name not in content.set)
    return Dialect(name, kind, lacks, content, text)


_CURES = {
    "list_type": "write it as an array of tables: [[read]]",
    "literal_error": "use one of the words allowed",
    "finite_number": "give a finite number",
}


def _first_error(text: DialectText, error: ValidationError) -> DialectError:
    first = error.errors(include_url=False)[0]
    key = tuple(first["loc"])
    if key[-1:] in {("float",), ("bool",)}:  # which of two types, no key
        key = key[:-1]
    if first["type"] == "extra_forbidden":
        allowed = ", ".join(_known_keys(key[:-1]))
        return text.error("is no key of a dialect", key, cure=f"remove it, or use one of {allowed}")
    if first["type"] == "missing":
        return text.error("is missing", key, cure="add it")
    problem = first["msg"].removeprefix("Value error, ")
    return text.error(
        problem[0].lower() + problem[1:],
        key,
        value=first["input"],
        cure=_CURES.get(first["type"], "correct it as drivers/README.md shows"),
    )


def _known_keys(table: tuple[Any, ...]) -> Iterator[str]:
    model: Any = DialectFile
    for part in table:
        if isinstance(part, int):
            continue
        fields = getattr(model, "model_fields", {})
        if part in fields:
            annotation = fields[part].annotation
            arguments = [a for a in get_args(annotation) if hasattr(a, "model_fields")]
            model = arguments[-1] if arguments else annotation
    for name, info in model.model_fields.items():
        yield info.alias or name
