"""Whether a dialect file makes sense: what types alone cannot tell."""

import re

from drivers.dialect_file import DialectFile, SettingSection, Spelling
from drivers.dialect_text import DialectText
from drivers.kinds import FLAG, Vocabulary
from drivers.phrases import IGNORED, Template
from drivers.wire_units import allowed_units

_NUMERIC = {"unit", "factor", "codes", "form", "least", "most"}
_FLAGGED = {"on", "off", "reads_on", "reads_off", "bit", "inverted"}


def check_meaning(text: DialectText, content: DialectFile, words: Vocabulary) -> None:
    """Raise DialectError at the first thing that makes no sense."""
    _check_reads(text, content)
    _check_values(text, content, words)
    _check_settings(text, content, words)


def _check_reads(text: DialectText, content: DialectFile) -> None:
    seen: set[str] = set()
    used = {s.source or n for n, s in content.values.items() if s.always is None}
    for index, read in enumerate(content.read):
        key = ("read", index, "reply")
        try:
            template = Template.of(read.reply)
        except ValueError as error:
            raise text.error(
                str(error), key, value=read.reply, cure='write it like "{x},{y}"'
            ) from None
        joins = content.dialect.joins
        if joins and joins in "".join(re.split(r"\{\w+\}", read.reply)):
            raise text.error(
                f"contains {joins!r}, which separates joined answers",
                key,
                value=read.reply,
                cure="leave out dialect.joins, so that each query is a message of its own",
            )
        for name in template.names:
            if name == IGNORED:
                continue
            if name in seen:
                raise text.error(
                    f"the placeholder {{{name}}} stands in two replies",
                    key,
                    value=read.reply,
                    cure="give the two different names",
                )
            if name not in used:
                raise text.error(
                    f"nothing uses the placeholder {{{name}}}",
                    key,
                    value=read.reply,
                    cure="write {_} for a part of no interest, or add it to [values]",
                )
            seen.add(name)


def _check_values(text: DialectText, content: DialectFile, words: Vocabulary) -> None:
    placeholders = {n for read in content.read for n in Template.of(read.reply).names} - {IGNORED}
    for name, section in content.values.items():
        key = ("values", name)
        if name not in words.values:
            raise text.error(
                f"a {content.dialect.kind} has no such value",
                key,
                cure=f"use {', '.join(words.values)}",
            )
        _check_spelling(text, key, section, words.values[name])
        source = section.source or name
        if section.always is None and source not in placeholders:
            raise text.error(
                f"no reply in [[read]] has the placeholder {{{source}}}",
                key,
                cure='add it to a reply, or name another with from = "..."',
            )
    for name in words.values:
        if name not in content.values:
            raise text.error(
                f"the value {name!r} is missing",
                ("values",),
                cure=f"add {name} = {{ ... }}, with always = ... if the instrument cannot say it",
            )


def _check_settings(text: DialectText, content: DialectFile, words: Vocabulary) -> None:
    for name, section in content.set.items():
        key = ("set", name)
        if name not in words.settings:
            possible = ", ".join(words.settings) or "none: it is only read"
            raise text.error(
                f"a {content.dialect.kind} has no such setting", key, cure=f"use {possible}"
            )
        _check_spelling(text, key, section, words.settings[name])
        try:
            names = Template.of(section.reply).names
        except ValueError as error:
            raise text.error(
                str(error), (*key, "reply"), value=section.reply, cure='write it like "{value}"'
            ) from None
        if "value" not in names or set(names) - {"value", IGNORED}:
            raise text.error(
                "must have {value}, and besides it only {_}",
                (*key, "reply"),
                value=section.reply,
                cure='write it like "{value}"',
            )
    for name in words.settings:
        if name not in content.set and name not in words.optional:
            raise text.error(
                f"the setting {name!r} is missing, and no night can do without it",
                ("set",),
                cure=f"add [set.{name}] with command and query",
            )


def _check_spelling(
    text: DialectText, key: tuple[str, str], section: Spelling, quantity: str
) -> None:
    flag = quantity == FLAG
    given = section.model_fields_set
    if wrong := sorted(given & (_NUMERIC if flag else _FLAGGED)):
        what = "is on or off" if flag else f"is a number ({quantity})"
        raise text.error(
            f"{key[1]} {what}, so this key has no meaning", (*key, wrong[0]), cure="remove it"
        )
    if "always" in given:
        _check_always(text, key, section, flag)
    elif flag:
        _check_flag(text, key, section)
    else:
        _check_number(text, key, section, quantity)


def _check_always(text: DialectText, key: tuple[str, str], section: Spelling, flag: bool) -> None:
    always = getattr(section, "always", None)
    if isinstance(always, bool) != flag:
        raise text.error(
            "is of the wrong type",
            (*key, "always"),
            value=always,
            cure="give true or false" if flag else "give a number, SI",
        )
    if beside := sorted(section.model_fields_set - {"always"}):
        raise text.error("stands beside always", (*key, beside[0]), cure="remove one of the two")


def _check_flag(text: DialectText, key: tuple[str, str], section: Spelling) -> None:
    given = section.model_fields_set
    setting = isinstance(section, SettingSection)
    for on, off in (("on", "off"), ("reads_on", "reads_off")):
        pair = {getattr(section, on, None), getattr(section, off, None)}
        if len(pair) == 1 and pair != {None}:
            raise text.error(f"{on} and {off} are the same", (*key, on), cure="make them differ")
        if len(pair) == 2 and None in pair:
            raise text.error(f"has only one of {on} and {off}", key, cure="give both")
    if section.bit is not None:
        words = {"reads_on"} if setting else {"on"}
        if clash := sorted(given & words):
            raise text.error(
                "a bit is not read as a word", (*key, clash[0]), cure="keep the bit or the words"
            )
    elif section.inverted:
        raise text.error(
            "only a bit can be inverted", (*key, "inverted"), cure="exchange on and off instead"
        )


def _check_number(
    text: DialectText, key: tuple[str, str], section: Spelling, quantity: str
) -> None:
    allowed = allowed_units(quantity)
    if section.unit not in allowed:
        raise text.error(
            "is no unit that a dialect knows here" if section.unit else "has no unit",
            (*key, "unit"),
            value=section.unit or None,
            cure=f"use one of {', '.join(allowed)}",
        )
    if not isinstance(section, SettingSection):
        return
    if section.least > section.most:
        raise text.error(
            "is above most", (*key, "least"), value=section.least, cure="exchange the two"
        )
    if section.codes is not None:
        plain = sorted(section.model_fields_set & {"form", "least", "most"})
        if plain:
            raise text.error(
                "has no meaning beside codes", (*key, plain[0]), cure="remove one of the two"
            )
