"""Putting numbered items in order: duplicates fall out, what is missing can be asked for."""

from collections.abc import Iterable
from typing import Generic, TypeVar

Item = TypeVar("Item")


class InOrder(Generic[Item]):
    """Gives items back in the order of their numbers, each once.

    Parameters
    ----------
    next_number : int or None
        The first number wanted; None takes the first that comes.
    most_ahead : int
        How many items beyond a gap are kept meanwhile; further ones are let go and have to be
        asked for again.
    """

    def __init__(self, next_number: int | None, most_ahead: int = 20_000) -> None:
        self._next = next_number
        self._ahead: dict[int, Item] = {}
        self._most_ahead = most_ahead
        self._last_known = 0
        self.duplicates = 0
        self.let_go = 0

    @property
    def next_number(self) -> int | None:
        """Number of the next item to be given back; None before the first is known."""
        return self._next

    def know_of(self, last_number: int) -> None:
        """Someone says that items up to this number exist."""
        if self._next is None:
            self._next = last_number + 1
        self._last_known = max(self._last_known, last_number)

    def accept(self, items: Iterable[tuple[int, Item]]) -> list[Item]:
        """Take items as they came, and give back those whose turn it is."""
        ready: list[Item] = []
        for number, item in items:
            if self._next is None:
                self._next = number
            self._last_known = max(self._last_known, number)
            if number < self._next or number in self._ahead:
                self.duplicates += 1
            elif number == self._next:
                ready.append(item)
                self._next += 1
                while self._ahead and self._next in self._ahead:
                    ready.append(self._ahead.pop(self._next))
                    self._next += 1
            elif len(self._ahead) < self._most_ahead:
                self._ahead[number] = item
            else:
                self.let_go += 1
        return ready

    def missing(self) -> tuple[int, int] | None:
        """First and last number of the first gap; None when there is none."""
        if self._next is None or self._next > self._last_known:
            return None
        return self._next, min(self._ahead) - 1 if self._ahead else self._last_known


class Asking:
    """When to ask for a gap: at once, and again only when nothing has come of it for a while."""

    def __init__(self, patience_s: float) -> None:
        self._patience_s = patience_s
        self._asked: tuple[int, int] | None = None
        self._seen_next = 0
        self._moved_s = 0.0

    def due(self, gap: tuple[int, int] | None, now_s: float) -> bool:
        """Whether to ask for this gap now; remembers that it was asked for."""
        if gap is None:
            self._asked = None
            return False
        if gap[0] != self._seen_next:
            self._seen_next, self._moved_s = gap[0], now_s
        waiting = self._asked is not None and gap[0] <= self._asked[1]
        if waiting and now_s - self._moved_s < self._patience_s:
            return False
        self._asked, self._moved_s = gap, now_s
        return True


class Replay:
    """Ranges of numbers to be sent again; remembers two ranges however many are asked for.

    The range being sent goes on to its end, so that a subscriber that asks for the same again and
    again can not keep the others from what they miss.
    """

    def __init__(self) -> None:
        self._now: tuple[int, int] | None = None
        self._later: tuple[int, int] | None = None

    def want(self, first: int, last: int) -> None:
        """Add a range, both ends included."""
        if self._now is None:
            self._now = (first, last)
        elif first >= self._now[0]:
            self._now = (self._now[0], max(self._now[1], last))
        elif self._later is None:
            self._later = (first, last)
        else:
            self._later = (min(self._later[0], first), max(self._later[1], last))

    def next_range(self) -> tuple[int, int] | None:
        """What is to be sent next, both ends included; None when there is nothing."""
        return self._now

    def sent(self, last: int) -> None:
        """Numbers up to ``last`` of the present range have been sent."""
        if self._now is not None:
            self._now = (last + 1, self._now[1])
            if self._now[0] > self._now[1]:
                self._now, self._later = self._later, None

    def nothing_left(self) -> None:
        """The ledger has nothing in the rest of the present range."""
        self._now, self._later = self._later, None
