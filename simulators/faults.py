"""Faults by hand: a panel that goes silent, garbles, freezes, is late, forgets or lies.

A quench by hand is `World.quench`.
"""

from simulators.front_panel import FrontPanel


class FaultyPanel(FrontPanel):
    """Another panel, with faults that can be switched while it works.

    Attributes
    ----------
    silent : bool
        Orders are carried out; answers never come.
    deaf : bool
        Nothing is carried out and nothing answered.
    late : bool
        Answers are held back; when it is off again, the next answer comes behind the held one.
    garbled : bool
        Every second character of an answer is wrong.
    ignores_writes : bool
        Orders are dropped, alone and out of a joined message, without an error.
    frozen : bool
        A query is answered as it was answered last, or the first time it is asked.
    replies : dict
        Message to the wrong answer that it gets.
    """

    def __init__(self, panel: FrontPanel) -> None:
        # The inner panel's tables, registers and queue serve; nothing of its own is built.
        self.panel = panel
        self.identity = panel.identity
        self.status = panel.status
        self.silent = False
        self.deaf = False
        self.late = False
        self.garbled = False
        self.ignores_writes = False
        self.frozen = False
        self.replies: dict[str, str] = {}
        self._seen: dict[str, str | None] = {}
        self._held: str | None = None

    def execute(self, line: str) -> str | None:
        """As the panel does, through the faults that are on."""
        reply = self._answer(line)
        if reply is None:
            return None
        if self.late:
            self._held = reply
            return None
        if self._held is not None:
            reply, self._held = f"{self._held}\n{reply}", None
        return reply

    def _answer(self, line: str) -> str | None:
        if self.ignores_writes:
            line = ";".join(unit for unit in line.split(";") if "?" in unit)
        if self.deaf or not line:
            return None
        if line in self.replies:
            return None if self.silent else self.replies[line]
        asks = "?" in line
        if asks and self.frozen and line in self._seen:
            reply = self._seen[line]
        else:
            reply = self.panel.execute(line)
            if asks and len(self._seen) < 1000:
                self._seen[line] = reply
        if self.silent or reply is None:
            return None
        return "".join(c if i % 2 else "~" for i, c in enumerate(reply)) if self.garbled else reply

    def overrun(self) -> None:
        """As the panel does."""
        self.panel.overrun()
