"""Bytes to and from a front panel: lines in, lines out, and the message exchange of IEEE 488.2."""

from simulators.front_panel import LINE_MAX, FrontPanel

OUTPUT_MAX = 1 << 20
"""Answers nobody fetches are dropped beyond this many bytes, oldest first."""


class LineAssembler:
    """Cuts a byte stream into lines for a panel; carries on after any garbage.

    Parameters
    ----------
    panel : FrontPanel
        Who carries the lines out.
    """

    def __init__(self, panel: FrontPanel) -> None:
        self._panel = panel
        self._partial = bytearray()
        self._overrun = False

    def feed(self, data: bytes) -> list[bytes]:
        """Take bytes as they come; give the answers, each with its line end."""
        if not self._partial and not self._overrun and data.find(b"\n") == len(data) - 1:
            return self._carry_out(data[:-1])
        answers: list[bytes] = []
        *complete, rest = data.split(b"\n")
        for piece in complete:
            self._append(piece)
            if self._overrun:
                self._panel.overrun()
            else:
                answers += self._carry_out(bytes(self._partial))
            self._partial.clear()
            self._overrun = False
        self._append(rest)
        return answers

    def clear(self) -> None:
        """Forget an unfinished line."""
        self._partial.clear()
        self._overrun = False

    def _append(self, piece: bytes) -> None:
        if self._overrun or len(self._partial) + len(piece) > LINE_MAX:
            self._overrun = True
            self._partial.clear()
        else:
            self._partial += piece

    def _carry_out(self, line: bytes) -> list[bytes]:
        if len(line) > LINE_MAX:
            self._panel.overrun()
            return []
        # Latin-1 maps every byte to one character, so no bytes can fail to decode.
        answer = self._panel.execute(line.removesuffix(b"\r").decode("latin-1"))
        return [] if answer is None else [answer.encode("ascii", "replace") + b"\n"]


class StreamPort:
    """A panel behind a byte stream, as a socket is: answers queue up, and a late one stays."""

    def __init__(self, panel: FrontPanel) -> None:
        self.panel = panel
        self._lines = LineAssembler(panel)
        self._output = bytearray()

    def write(self, data: bytes) -> None:
        """Bytes from the controller."""
        for answer in self._lines.feed(data):
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
        end = len(self._output)
        if stop is not None and (found := self._output.find(stop)) >= 0:
            end = found + 1
        end = min(end, count)
        taken = bytes(self._output[:end])
        del self._output[:end]
        return taken, False


class MessagePort:
    """A panel behind an interface with END, as GPIB or VXI-11 is: message exchange of IEEE 488.2.

    A new message with an answer still unread is -410, and that answer is lost; reading with no
    answer due is -420.
    """

    def __init__(self, panel: FrontPanel) -> None:
        self.panel = panel
        self._lines = LineAssembler(panel)
        self._answer = b""

    def write(self, data: bytes) -> None:
        """Bytes from the controller, END with the last."""
        if self._answer:
            self._answer = b""
            self.panel.status.note(-410)
        answers = self._lines.feed(data if data.endswith(b"\n") else data + b"\n")
        for missed in answers[:-1]:
            if missed:
                self.panel.status.note(-410)
        self._answer = answers[-1] if answers else b""

    def clear(self) -> None:
        """Device clear: unread answers and an unfinished line are gone."""
        self._lines.clear()
        self._answer = b""

    def take(self, count: int, stop: int | None) -> tuple[bytes, bool]:
        """Up to `count` bytes, up to and with the byte `stop`; whether they end the message."""
        if not self._answer:
            self.panel.status.note(-420)
            return b"", False
        end = len(self._answer)
        if stop is not None and (found := self._answer.find(stop)) >= 0:
            end = found + 1
        end = min(end, count)
        taken, self._answer = self._answer[:end], self._answer[end:]
        return taken, not self._answer
