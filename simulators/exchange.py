"""Bytes to and from a front panel: lines in, lines out, and the message exchange of IEEE 488.2."""

from collections import deque
from collections.abc import Callable

from simulators.front_panel import LINE_MAX, Busy, FrontPanel
from simulators.syntax import inside_block

OUTPUT_MAX = 1 << 20
"""Answers nobody fetches are dropped beyond this many bytes, oldest first."""

ANSWER_MAX = 1 << 16
"""Longest answer to one message behind an interface with END; a longer one is -430."""

BEHIND_MAX = 1 << 16
"""Bytes of messages that wait behind one at *WAI or *OPC?; more are -363."""


class LineAssembler:
    """Cuts a byte stream into lines for a panel; carries on after any garbage.

    A line end inside a definite length block belongs to the block. While a message waits for an
    operation (*WAI, *OPC?), what comes behind it waits too.

    Parameters
    ----------
    panel : FrontPanel
        Who carries the lines out.
    """

    def __init__(self, panel: FrontPanel) -> None:
        self._panel = panel
        self._partial = bytearray()
        self._overrun = False
        self._busy: Busy | None = None
        self._behind: deque[bytes] = deque()
        self._behind_bytes = 0

    @property
    def busy(self) -> bool:
        """Whether a message waits for an operation to be complete."""
        return self._busy is not None

    def feed(self, data: bytes) -> list[bytes]:
        """Take bytes as they come; give the answers, each with its line end."""
        answers = self.go_on()
        idle = not self._partial and not self._overrun and self._busy is None
        if idle and b"#" not in data and data.find(b"\n") == len(data) - 1:
            return answers + self._carry_out(data[:-1])
        *complete, rest = data.split(b"\n")
        for piece in complete:
            self._append(piece)
            if b"#" in self._partial and inside_block(self._partial.decode("latin-1") + "\n"):
                self._append(b"\n")
                continue
            if self._overrun:
                self._panel.overrun()
            else:
                answers += self._take(bytes(self._partial))
            self._partial.clear()
            self._overrun = False
        self._append(rest)
        return answers

    def go_on(self) -> list[bytes]:
        """Answers that have become due since the message at the front began to wait."""
        answers = self._answer_of(self._busy.go_on) if self._busy else []
        while self._behind and self._busy is None:
            line = self._behind.popleft()
            self._behind_bytes -= len(line)
            answers += self._carry_out(line)
        return answers

    def clear(self) -> None:
        """Device clear: an unfinished line and everything that waits are gone."""
        self.give_up()
        self._partial.clear()
        self._overrun = False

    def give_up(self) -> bool:
        """Forget the message that waits and all behind it; whether there was one."""
        waited = self._busy is not None
        self._busy = None
        self._behind.clear()
        self._behind_bytes = 0
        return waited

    def _append(self, piece: bytes) -> None:
        if self._overrun or len(self._partial) + len(piece) > LINE_MAX:
            self._overrun = True
            self._partial.clear()
        else:
            self._partial += piece

    def _take(self, line: bytes) -> list[bytes]:
        if self._busy is None:
            return self._carry_out(line)
        if self._behind_bytes + len(line) > BEHIND_MAX:
            self._panel.overrun()
        else:
            self._behind.append(line)
            self._behind_bytes += len(line)
        return []

    def _carry_out(self, line: bytes) -> list[bytes]:
        if len(line) > LINE_MAX:
            self._panel.overrun()
            return []
        # Latin-1 maps every byte to one character, so no bytes can fail to decode.
        text = line.removesuffix(b"\r").decode("latin-1")
        return self._answer_of(lambda: self._panel.execute(text))

    def _answer_of(self, work: Callable[[], str | None]) -> list[bytes]:
        try:
            answer = work()
        except Busy as busy:
            self._busy = busy
            return []
        self._busy = None
        return [] if answer is None else [answer.encode("ascii", "replace") + b"\n"]


class StreamPort:
    """A panel behind a byte stream, as a socket is: answers queue up, and a late one stays."""

    def __init__(self, panel: FrontPanel) -> None:
        self.panel = panel
        self._lines = LineAssembler(panel)
        self._output = bytearray()

    def write(self, data: bytes) -> None:
        """Bytes from the controller."""
        self._put(self._lines.feed(data))

    def _put(self, answers: list[bytes]) -> None:
        for answer in answers:
            self._output += answer
        if len(self._output) > OUTPUT_MAX:
            del self._output[:-OUTPUT_MAX]

    def clear(self) -> None:
        """Device clear: unread answers and an unfinished line are gone."""
        self._lines.clear()
        self._output.clear()

    def take(self, count: int, stop: int | None) -> tuple[bytes, bool]:
        """Up to `count` bytes, up to and with the byte `stop`; whether they end a message.

        A stream has no END indicator, so the second value is always False.
        """
        if self._lines.busy:
            self._put(self._lines.go_on())
        end = len(self._output)
        if stop is not None and (found := self._output.find(stop)) >= 0:
            end = found + 1
        end = min(end, count)
        taken = bytes(self._output[:end])
        del self._output[:end]
        return taken, False


class MessagePort:
    """A panel behind an interface with END, as GPIB or VXI-11 is: message exchange of IEEE 488.2.

    A new message with an answer still unread, or still waited for, is -410, and that answer is
    lost; reading with no answer due is -420; an answer that the output queue cannot hold is -430.
    """

    def __init__(self, panel: FrontPanel) -> None:
        self.panel = panel
        self._lines = LineAssembler(panel)
        self._answer = b""

    def write(self, data: bytes) -> None:
        """Bytes from the controller, END with the last."""
        waited = self._lines.give_up()
        if self._answer or waited:
            self._answer = b""
            self.panel.status.note(-410)
        answers = self._lines.feed(data if data.endswith(b"\n") else data + b"\n")
        for missed in answers[:-1]:
            if missed:
                self.panel.status.note(-410)
        self._keep(answers[-1] if answers else b"")

    def _keep(self, answer: bytes) -> None:
        if len(answer) > ANSWER_MAX:
            self.panel.status.note(-430)
            answer = b""
        self._answer = answer

    @property
    def message_available(self) -> bool:
        """Whether an answer is there to be read."""
        self._go_on()
        return bool(self._answer)

    def _go_on(self) -> None:
        if self._lines.busy and (answers := self._lines.go_on()):
            self._keep(answers[-1])

    def clear(self) -> None:
        """Device clear: unread answers and an unfinished line are gone."""
        self._lines.clear()
        self._answer = b""

    def take(self, count: int, stop: int | None) -> tuple[bytes, bool]:
        """Up to `count` bytes, up to and with the byte `stop`; whether they end the message."""
        self._go_on()
        if not self._answer:
            if not self._lines.busy:
                self.panel.status.note(-420)
            return b"", False
        end = len(self._answer)
        if stop is not None and (found := self._answer.find(stop)) >= 0:
            end = found + 1
        end = min(end, count)
        taken, self._answer = self._answer[:end], self._answer[end:]
        return taken, not self._answer
