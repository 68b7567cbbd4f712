"""What is said to an instrument, and how its replies are taken apart."""

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

from drivers.errors import NotANumber
from drivers.wordings import Value, Wording

_PLACEHOLDER = re.compile(r"\{([a-z_][a-z0-9_]*)\}")
IGNORED = "_"
"""Placeholder for a part of a reply that is of no interest."""


@dataclass(frozen=True, slots=True)
class Template:
    """The shape of a reply: literal text around ``{placeholders}``."""

    text: str
    names: tuple[str, ...]
    pattern: re.Pattern[str]

    @classmethod
    def of(cls, text: str) -> "Template":
        """Read a template.

        Raises
        ------
        ValueError
            No placeholder, one that stands twice, two without text between them, a loose brace.
        """
        names = _PLACEHOLDER.findall(text)
        literals = _PLACEHOLDER.split(text)[::2]
        if not names:
            raise ValueError("has no {placeholder}")
        if any("{" in part or "}" in part for part in literals):
            raise ValueError("has a brace that belongs to no {placeholder}")
        known = [name for name in names if name != IGNORED]
        if len(set(known)) < len(known):
            raise ValueError("has a placeholder twice")
        if any(not part for part in literals[1:-1]):
            raise ValueError("has two placeholders with no text between them")
        pattern = "(.+?)".join(re.escape(part) for part in literals)
        return cls(text, tuple(names), re.compile(pattern, re.ASCII))

    def parts(self, reply: str) -> dict[str, str]:
        """Text of each placeholder. Raises ValueError for a reply of another shape."""
        found = self.pattern.fullmatch(reply.strip())
        if not found:
            raise ValueError(f"it does not have the shape {self.text!r}")
        return dict(zip(self.names, found.groups(), strict=True))


@dataclass(frozen=True, slots=True)
class Question:
    """One query and the values in its reply: name, placeholder, wording."""

    query: str
    reply: Template
    values: tuple[tuple[str, str, Wording], ...]

    def parse(self, reply: str) -> dict[str, Value]:
        """SI values by name. Raises ValueError, NotANumber."""
        parts = self.reply.parts(reply)
        values: dict[str, Value] = {}
        for name, placeholder, wording in self.values:
            try:
                values[name] = wording.decode(parts[placeholder])
            except NotANumber as error:
                raise NotANumber(f"{name}: {error}") from None
            except ValueError as error:
                raise ValueError(f"{name}: {error}") from None
        return values


@dataclass(frozen=True, slots=True)
class Look:
    """Everything that is asked in one look at an instrument.

    Attributes
    ----------
    questions : tuple of Question
    joins : str
        What joins queries in a message, and answers in its reply; empty for one query a message.
    always : dict
        Values that need no question.
    """

    questions: tuple[Question, ...]
    joins: str
    always: Mapping[str, Value] = field(default_factory=dict)

    def exchanges(self) -> list[tuple[str, Callable[[str], dict[str, Value]]]]:
        """Message and parse of each exchange; a single one if queries can be joined."""
        if not self.joins or len(self.questions) == 1:
            return [(question.query, question.parse) for question in self.questions]
        return [(self.joins.join(q.query for q in self.questions), self._parse_joined)]

    def _parse_joined(self, reply: str) -> dict[str, Value]:
        answers = reply.split(self.joins)
        if len(answers) != len(self.questions):
            raise ValueError(f"{len(answers)} answers to {len(self.questions)} queries")
        values: dict[str, Value] = {}
        for question, text in zip(self.questions, answers, strict=True):
            values.update(question.parse(text))
        return values


@dataclass(frozen=True, slots=True)
class Setting:
    """Something that can be written and read back.

    Attributes
    ----------
    command : str
        With ``{value}``.
    question : Question
        Reads ``value`` back.
    wording : Wording
    joins : str
        What joins command and read-back in one message; empty for two exchanges.
    """

    command: str
    question: Question
    wording: Wording
    joins: str

    def spelled(self, value: Value) -> str:
        """The command for a value, SI. Raises ValueError for one that cannot be sent."""
        return self.command.replace("{value}", self.wording.encode(value))

    def parse(self, reply: str) -> Value:
        """The value read back."""
        return self.question.parse(reply)["value"]
