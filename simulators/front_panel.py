"""The instrument side of IEEE 488.2 and SCPI-1999, built from a table of commands.

A message is taken apart once and kept; the same query then costs a look-up and its answers.
A command error ends the message it is in; an execution error ends only its own command.
"""

import itertools
import logging
import math
import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from functools import partial

from simulators import syntax
from simulators.status import Refused, StatusModel

_LOG = logging.getLogger(__name__)
_KEPT_MESSAGES_MAX = 512
LINE_MAX = 4096
"""Longest program message, characters; a longer one is -363."""

VERSION = "0.1"


@dataclass(frozen=True, slots=True)
class Numeric:
    """A numeric parameter.

    Attributes
    ----------
    unit : str
        Suffix of the unit, upper case; empty for none.
    minimum, maximum : callable or float
        What MINimum and MAXimum stand for, and the range allowed; -222 outside.
    default : float or None
        What DEFault stands for; None refuses it.
    integer : bool
        Round to a whole number and answer as one.
    """

    unit: str = ""
    minimum: Callable[[], float] | float = -math.inf
    maximum: Callable[[], float] | float = math.inf
    default: float | None = None
    integer: bool = False

    def limits(self) -> tuple[float, float]:
        """Range in force."""
        low = self.minimum() if callable(self.minimum) else self.minimum
        high = self.maximum() if callable(self.maximum) else self.maximum
        return low, high

    def special(self, word: str) -> float | None:
        """Value of MINimum, MAXimum or DEFault; None for any other word."""
        low, high = self.limits()
        if word in {"MIN", "MINIMUM"} and math.isfinite(low):
            return low
        if word in {"MAX", "MAXIMUM"} and math.isfinite(high):
            return high
        return self.default if word in {"DEF", "DEFAULT"} else None


@dataclass(frozen=True, slots=True)
class Command:
    """One row of a command table.

    Attributes
    ----------
    header : str
        Long form with the short form in capitals, such as ``SOURce:FIELd:TARGet``; a node in
        brackets may be left out.
    set, set_boolean, do : callable, optional
        What to call with a number, with a boolean, with nothing.
    get : callable, optional
        What answers the query, as text.
    numeric : Numeric
        The number that `set` takes.
    words : mapping
        What to call for a word, upper case, in place of a number or boolean.
    """

    header: str
    get: Callable[[], str] | None = None
    set: Callable[[float], None] | None = None
    set_boolean: Callable[[bool], None] | None = None
    do: Callable[[], None] | None = None
    numeric: Numeric = Numeric()
    words: Mapping[str, Callable[[], None]] = field(default_factory=dict)

    @property
    def commanded(self) -> bool:
        """Whether it has a form without question mark."""
        return bool(self.set or self.set_boolean or self.do)

    def spellings(self) -> Iterator[str]:
        """Every way to write the header, upper case."""
        choices: list[list[str]] = []
        for node, optional in _nodes(self.header):
            short = re.sub("[a-z]", "", node)
            choices.append(list({short, node.upper()} | ({""} if optional else set())))
        for words in itertools.product(*choices):
            yield ":".join(word for word in words if word)


def _nodes(header: str) -> list[tuple[str, bool]]:
    parts = re.findall(r"(\[?):?([*A-Za-z]+)\]?", header)
    return [(name, bool(bracket)) for bracket, name in parts]


Step = Callable[[], str | None]


class Busy(Exception):
    """A message waits, at *WAI or *OPC?, for an operation that is under way.

    Attributes
    ----------
    go_on : callable
        Carries the rest of the message out; raises Busy again while the operation goes on.
    """

    def __init__(self, go_on: Callable[[], str | None]) -> None:
        super().__init__("waiting for an operation to be complete")
        self.go_on = go_on


class _Waits(Exception):
    """A step that cannot be done before all operations are complete."""


class FrontPanel:
    """One instrument as its front panel: text in, text out.

    Parameters
    ----------
    model : str
        Second field of the identity.
    serial : str
        Third field of the identity.
    """

    def __init__(self, model: str, serial: str) -> None:
        self.identity = f"NIGHTFIELD,{model},{serial},{VERSION}"
        self.status = StatusModel(self.operation, self.questionable, self.pending)
        self._table: dict[str, Command] = {}
        self._commands: list[Command] = []
        self._kept: dict[str, tuple[Step, ...]] = {}
        for command in (*self._common(), *self.commands()):
            self._commands.append(command)
            for spelling in command.spellings():
                self._table[spelling] = command

    # -- what an instrument fills in ----------------------------------------------------------

    def commands(self) -> list[Command]:
        """The instrument's own commands."""
        return []

    def operation(self) -> int:
        """OPERation condition register."""
        return 0

    def questionable(self) -> int:
        """QUEStionable condition register."""
        return 0

    def pending(self) -> bool:
        """Whether an overlapped operation, such as a ramp, is under way."""
        return False

    def self_test(self) -> int:
        """Result of *TST?: 0 is a pass."""
        return 0

    def reset(self) -> None:
        """What *RST does to the instrument."""

    # -- text in, text out --------------------------------------------------------------------

    def execute(self, line: str) -> str | None:
        """Carry out one program message.

        Parameters
        ----------
        line : str
            The message without its line end. Any text is allowed.

        Returns
        -------
        str or None
            Answers joined by ``;`` without line end; None if nothing was asked or answered.

        Raises
        ------
        Busy
            The message waits for an operation to be complete; the exception carries the rest.
        """
        steps = self._kept.get(line)
        if steps is None:
            steps = self._prepare(line)
        return self._carry_out(steps, 0, [], line)

    def _carry_out(
        self, steps: tuple[Step, ...], first: int, answers: list[str], line: str
    ) -> str | None:
        for at in range(first, len(steps)):
            try:
                answer = steps[at]()
            except _Waits:
                raise Busy(partial(self._carry_out, steps, at, answers, line)) from None
            except Refused as refused:
                self.status.note(refused.code, refused.detail)
            except Exception:
                _LOG.exception("%s failed on %.80r", self.identity, line)
                self.status.note(-310)
            else:
                if answer is not None:
                    answers.append(answer)
                    self.status.message_available = True
        self.status.message_available = False
        return ";".join(answers) if answers else None

    def overrun(self) -> None:
        """A message was longer than the input buffer and is lost."""
        self.status.note(-363)

    def _prepare(self, line: str) -> tuple[Step, ...]:
        if len(line) > LINE_MAX:
            return (self._refusing(Refused(-363)),)
        steps: list[Step] = []
        path, indefinite = "", False
        try:
            for unit in syntax.units(line):
                command, path = self._find(unit.header, path)
                if unit.query and indefinite:
                    raise Refused(-440, syntax.printable(unit.header))
                indefinite = indefinite or command.header == "*IDN"
                steps.append(self._step(command, unit))
                if not unit.query:
                    steps.append(self.status.observe)
        except Refused as refused:
            steps.append(self._refusing(refused))
        except Exception:
            _LOG.exception("%s could not read %.80r", self.identity, line)
            steps.append(self._refusing(Refused(-310)))
        if len(self._kept) >= _KEPT_MESSAGES_MAX:
            self._kept.clear()
        kept = self._kept[line] = tuple(steps)
        return kept

    def _refusing(self, refused: Refused) -> Step:
        def step() -> None:
            raise Refused(refused.code, refused.detail)

        return step

    def _find(self, header: str, path: str) -> tuple[Command, str]:
        """Command of a header, and the path that a following header continues."""
        name = header.upper()
        if name.startswith("*"):
            if name not in self._table:
                raise Refused(-113, syntax.printable(header))
            return self._table[name], path
        name = name[1:] if name.startswith(":") else path + name
        command = self._table.get(name)
        if command is None:
            command = self._table.get(self._without_numbers(name, header))
        if command is None:
            raise Refused(-113, syntax.printable(header))
        above = name.rpartition(":")[0]
        return command, above + ":" if above else ""

    @staticmethod
    def _without_numbers(name: str, header: str) -> str:
        """Drop numeric suffixes: 1 is the default, others do not exist here."""
        nodes = []
        for node in name.split(":"):
            bare = node.rstrip("0123456789")
            if node[len(bare) :].lstrip("0") not in {"", "1"}:
                raise Refused(-114, syntax.printable(header))
            nodes.append(bare)
        return ":".join(nodes)

    # -- one command --------------------------------------------------------------------------

    def _step(self, command: Command, unit: syntax.Unit) -> Step:
        if unit.query:
            return self._query_step(command, unit)
        if not command.commanded:
            raise Refused(-113, f"{syntax.printable(unit.header)} is a query only")
        if command.do:
            if unit.parameters:
                raise Refused(-108, syntax.printable(unit.parameters[0]))
            return command.do
        if not unit.parameters:
            raise Refused(-109, syntax.printable(unit.header))
        if len(unit.parameters) > 1:
            raise Refused(-108, syntax.printable(unit.parameters[1]))
        text = unit.parameters[0]
        if text.upper() in command.words:
            return command.words[text.upper()]
        if command.set_boolean:
            value, set_boolean = syntax.boolean(text), command.set_boolean
            return lambda: set_boolean(value)
        return self._set_step(command, text)

    def _query_step(self, command: Command, unit: syntax.Unit) -> Step:
        if command.get is None:
            raise Refused(-113, f"{syntax.printable(unit.header)} has no query")
        if not unit.parameters:
            return command.get
        word = unit.parameters[0].upper()
        if len(unit.parameters) > 1 or command.set is None:
            raise Refused(-108, syntax.printable(unit.parameters[-1]))
        if command.numeric.special(word) is None:
            raise Refused(-108, syntax.printable(word))

        def step() -> str:
            return answer(command.numeric.special(word) or 0.0, command.numeric.integer)

        return step

    def _set_step(self, command: Command, text: str) -> Step:
        set_number, numeric = command.set, command.numeric
        assert set_number is not None
        word = text.upper()
        if numeric.special(word) is not None:
            # The limits may move, so the word is looked up each time.
            return lambda: set_number(numeric.special(word) or 0.0)
        infinite = {"INF": math.inf, "INFINITY": math.inf, "NINF": -math.inf, "NAN": math.nan}
        if word in infinite:
            value = infinite[word]
        else:
            value = syntax.number(text, syntax.suffixes(numeric.unit))
        if numeric.integer and math.isfinite(value):
            value = float(round(value))

        def step() -> None:
            low, high = numeric.limits()
            if not (math.isfinite(value) and low <= value <= high):
                raise Refused(-222, f"{value:g} is outside {low:g} to {high:g}")
            set_number(value)

        return step

    # -- what every instrument understands ----------------------------------------------------

    def _common(self) -> list[Command]:
        status = self.status
        byte = Numeric(minimum=0, maximum=255, integer=True)
        word = Numeric(minimum=0, maximum=65535, integer=True)
        common = [
            Command("*CLS", do=status.clear),
            Command("*ESE", get=lambda: str(status.event_enable), set=self._set_ese, numeric=byte),
            Command("*ESR", get=lambda: str(status.take_event())),
            Command("*IDN", get=lambda: self.identity),
            Command("*OPC", get=self._completed, do=status.complete),
            Command("*RST", do=self._reset),
            Command(
                "*SRE", get=lambda: str(status.service_enable), set=self._set_sre, numeric=byte
            ),
            Command("*STB", get=lambda: str(status.byte())),
            Command("*TST", get=self._test),
            Command("*WAI", do=self._wait),
            Command("SYSTem:ERRor[:NEXT]", get=status.errors.pop),
            Command("SYSTem:ERRor:COUNt", get=lambda: str(len(status.errors))),
            Command("SYSTem:VERSion", get=lambda: "1999.0"),
            Command("SYSTem:HELP:HEADers", get=self._headers),
            Command("STATus:PRESet", do=self._preset),
        ]
        for name, group in (
            ("OPERation", status.operation),
            ("QUEStionable", status.questionable),
        ):
            root = f"STATus:{name}"
            common += [
                Command(f"{root}[:EVENt]", get=lambda g=group: str(g.take_event())),  # type: ignore[misc]
                Command(f"{root}:CONDition", get=lambda g=group: str(g.observe())),  # type: ignore[misc]
            ]
            for node, attribute in (
                ("ENABle", "enable"),
                ("PTRansition", "positive"),
                ("NTRansition", "negative"),
            ):
                common.append(
                    Command(
                        f"{root}:{node}",
                        get=lambda g=group, a=attribute: str(getattr(g, a)),  # type: ignore[misc]
                        # Bit 15 is never used and always reads 0.
                        set=lambda v, g=group, a=attribute: setattr(g, a, int(v) & 0x7FFF),  # type: ignore[misc]
                        numeric=word,
                    )
                )
        return common

    def _wait(self) -> None:
        if self.pending():
            raise _Waits

    def _completed(self) -> str:
        self._wait()
        return "1"

    def _reset(self) -> None:
        self.status.forget_completion()
        self.reset()

    def _test(self) -> str:
        result = self.self_test()
        if result:
            self.status.note(-330)
        return str(result)

    def _set_ese(self, value: float) -> None:
        self.status.event_enable = int(value)

    def _set_sre(self, value: float) -> None:
        self.status.service_enable = int(value) & ~0x40

    def _preset(self) -> None:
        self.status.operation.preset()
        self.status.questionable.preset()

    def _headers(self) -> str:
        """SYSTem:HELP:HEADers?: a definite length block, one header a line."""
        lines = []
        for command in self._commands:
            mark = "" if command.commanded else "/qonly/"
            if command.get is None:
                mark = "/nquery/"
            name = command.header if command.header.startswith("*") else ":" + command.header
            lines.append(name + ("?" if mark == "/qonly/" else "") + mark)
        text = "".join(line + "\n" for line in lines)
        length = str(len(text))
        return f"#{len(length)}{length}{text}"


def answer(value: float, integer: bool = False) -> str:
    """A number as an answer: NR1 for whole numbers, NR3 else."""
    return str(round(value)) if integer else syntax.nr3(value)
