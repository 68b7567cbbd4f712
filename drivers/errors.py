"""What can go wrong between a program and an instrument, told apart by class."""


class LinkError(Exception):
    """An exchange with an instrument, or the opening of its link, failed.

    Attributes
    ----------
    name, address : str
        The instrument's name in the rig, and its VISA address.
    text : str
        The message that was to be sent; empty where none was.
    problem : str
        What happened.
    sent : bool
        Whether the instrument may have received the message. A write that failed with ``sent``
        may have been carried out.
    """

    def __init__(
        self, name: str, address: str, text: str = "", *, problem: str, sent: bool = False
    ) -> None:
        self.name, self.address, self.text = name, address, text
        self.problem, self.sent = problem, sent
        super().__init__(name, address, text, problem)

    def __str__(self) -> str:
        message = f", message {self.text!r}" if self.text else ""
        return f"{self.name} at {self.address}{message}: {self.problem}"


class Unreachable(LinkError):
    """Nothing answers at the address: refused, unknown, or no connection in time."""


class Closed(LinkError):
    """The other end closed the connection, or the link was closed here."""


class Timeout(LinkError):
    """No complete reply came in time."""


class WrongInstrument(LinkError):
    """Something answers, but it is not the instrument that is expected.

    Attributes
    ----------
    expected, identity : str
        What should have been in the identity, and the identity that was given.
    """

    def __init__(
        self, name: str, address: str, text: str = "", *, expected: str, identity: str
    ) -> None:
        self.expected, self.identity = expected, identity
        problem = f"its identity is {identity!r}, expected {expected!r}"
        super().__init__(name, address, text, problem=problem, sent=True)


class BadReply(LinkError):
    """A reply that cannot be what was asked for: garbled, cut, doubled, or not a number.

    Attributes
    ----------
    reply : str
        The reply as it came; bytes outside ASCII shown as escapes.
    """

    def __init__(
        self, name: str, address: str, text: str = "", *, reply: str, problem: str
    ) -> None:
        self.reply = reply
        super().__init__(
            name, address, text, problem=f"bad reply {reply[:200]!r}: {problem}", sent=True
        )


class NotANumber(ValueError):
    """A well-formed reply that says "no number" (nan, infinity, 9.91E37): asking again is vain."""
