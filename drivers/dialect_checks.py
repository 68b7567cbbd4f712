"""Whether a dialect file makes sense: what types alone cannot tell."""

import re

from drivers.dialect_file import DialectFile, Spelling
from drivers.dialect_text import DialectText
from drivers.kinds import FLAG, Vocabulary
from drivers.phrases import IGNORED, Template
from drivers.wire_units import allowed_units

_NUMERIC = {"unit", "factor", "codes", "form", "least", "most"}
_FLAGGED = {"on", "off", "bit", "inverted"}


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
    placeholders = {n for read in content.read for n in Template.of(read.reply).names}
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
    always = getattr(section, "always", None)
    given = section.model_fields_set
    wrong = given & (_NUMERIC if flag else _FLAGGED)
    if wrong:
        what = "is on or off" if flag else f"is a number ({quantity})"
        raise text.error(
            f"{key[1]} {what}, so this key has no meaning",
            (*key, sorted(wrong)[0]),
            cure="remove it",
        )
    if always is not None:
        if isinstance(always, bool) != flag:
            raise text.error(
                "must be true or false" if flag else "must be a number",
                (*key, "always"),
                value=always,
                cure="correct it",
            )
        if given - {"always"}:
            raise text.error(
                "stands beside always", (*key, *(given - {"always"})), cure="remove it"
            )
        return
    if flag:
        if section.bit is not None and given & {"on", "off"}:
            raise text.error(
                "a bit is not spelled as a word", (*key, "bit"), cure="keep bit, or on and off"
            )
        if section.inverted and section.bit is None:
            raise text.error(
                "only a bit can be inverted", (*key, "inverted"), cure="swap on and off"
            )
        return
    allowed = allowed_units(quantity)
    if section.unit not in allowed:
        raise text.error(
            "is no unit that a dialect knows here" if section.unit else "has no unit",
            (*key, "unit"),
            value=section.unit,
            cure=f"use one of {', '.join(allowed)}",
        )
