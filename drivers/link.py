"""A link: one open VISA session with its timeouts, retries and bookkeeping."""

import asyncio
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, TypeVar

import pyvisa

from drivers.errors import (
    BadReply,
    Closed,
    LinkError,
    NotANumber,
    Timeout,
    Unreachable,
    WrongInstrument,
)
from drivers.session import Session
from drivers.wire import WireSettings
from drivers.worker import Worker

__all__ = [
    "BadReply",
    "Closed",
    "Link",
    "LinkError",
    "Timeout",
    "Unreachable",
    "WrongInstrument",
    "open_link",
]

T = TypeVar("T")
Trace = Callable[[float, str, str], None]


@dataclass(slots=True)
class Counters:
    """What a link has been through.

    Attributes
    ----------
    exchanges : int
        Messages sent and, where a reply was due, answered.
    retries : int
        Attempts beyond the first.
    timeouts, errors : int
        Attempts that ended so; timeouts count as errors too.
    opened : int
        Sessions opened, the first one included.
    """

    exchanges: int = 0
    retries: int = 0
    timeouts: int = 0
    errors: int = 0
    opened: int = 0


class Link:
    """An open session with one instrument; made by `open_link`.

    Exchanges never interleave. After a timeout, a broken or doubled reply or a cancelled exchange,
    the session is opened anew and the instrument's identity compared before anything else is
    sent, so that a late reply is never taken for that of a later query.
    """

    def __init__(
        self,
        make_session: Callable[[], Session],
        *,
        name: str,
        address: str,
        timeout_s: float,
        retries: int,
        retry_pause_s: float,
        inline: bool,
        gap_s: float,
        trace: Trace | None,
        now: Callable[[], float] | None,
    ) -> None:
        self.name, self.address = name, address
        self.counters = Counters()
        self._make_session = make_session
        self._session = make_session()
        self._retries, self._retry_pause_s, self._gap_s = retries, retry_pause_s, gap_s
        self._worker: Worker | None = None
        self._inline, self._closed = inline, False
        self._timeout_s = timeout_s
        # A job is at most three proofs and one exchange, behind one that was given up.
        self._stall_s = 10 * timeout_s + 5
        self._lock = asyncio.Lock()
        self._trace = trace
        self._now = now or asyncio.get_running_loop().time
        self._last_s = float("-inf")

    @property
    def identity(self) -> str:
        """The instrument's identity, as it was given when the session was opened."""
        return self._session.identity or ""

    async def query(self, text: str) -> str:
        """Ask, and return the reply without its line end. Repeated after a failure, boundedly.

        Raises
        ------
        LinkError
        """
        return await self.ask(text, str)

    async def ask(self, text: str, parse: Callable[[str], T], *, repeat: bool = True) -> T:
        """Ask, and return what ``parse`` makes of the reply.

        Parameters
        ----------
        text : str
            The message, ASCII, without its line end.
        parse : callable
            Raises ValueError for a reply that is not the answer to this question, which counts
            as a failed attempt; NotANumber for one that is, but holds no number.
        repeat : bool
            False for a message that also sets something: it is sent at most once.

        Raises
        ------
        LinkError
        """
        async with self._lock:
            return await self._attempts(text, parse, repeat)

    async def write(self, text: str) -> None:
        """Send a message that has no reply. Never sent twice.

        Raises
        ------
        LinkError
            With ``sent`` where the instrument may have received it all the same.
        """
        async with self._lock:
            await self._attempts(text, None, False)

    async def close(self) -> None:
        """Close the session; safe to call twice. Waits for an exchange in progress."""
        self._closed = True
        async with self._lock:
            if self._inline:
                self._session.close()
            elif self._worker is not None:
                worker, self._worker = self._worker, None
                try:
                    await worker.run(self._session.close, self._stall_s)
                except TimeoutError:
                    pass  # a VISA call that never returns; its thread ends with the program
                finally:
                    worker.stop()

    # -- within -------------------------------------------------------------------------------

    async def _attempts(self, text: str, parse: Callable[[str], T] | None, repeat: bool) -> T:
        attempt = 0
        while True:
            try:
                return await self._attempt(text, parse)
            except LinkError as error:
                counters = self.counters
                counters.errors += 1
                counters.timeouts += isinstance(error, Timeout)
                vain = isinstance(error.__cause__, NotANumber) or self._closed
                if vain or attempt >= self._retries or (error.sent and not repeat):
                    raise
                counters.retries += 1
            attempt += 1
            await asyncio.sleep(self._retry_pause_s)

    async def _attempt(self, text: str, parse: Callable[[str], T] | None) -> T:
        if self._closed:
            raise Closed(self.name, self.address, text, problem="the link was closed")
        if self._gap_s:
            await asyncio.sleep(max(0.0, self._last_s + self._gap_s - self._now()))
        session, trace, began_s = self._session, self._trace, self._now()
        if trace:
            trace(self._now(), ">", text)
        try:
            if self._inline:
                reply = session.exchange(text, parse is not None)
            else:
                reply = await self._in_thread(
                    text, lambda: session.exchange(text, parse is not None)
                )
        except LinkError as error:
            if self._inline and isinstance(error, Timeout):
                # A simulated instrument's silence is known at once; it still costs the time.
                await asyncio.sleep(max(0.0, began_s + self._timeout_s - self._now()))
            if trace:
                trace(self._now(), "!", error.problem)
            raise
        finally:
            self.counters.opened = session.opened
            if self._gap_s:
                self._last_s = self._now()
        if trace and parse is not None:
            trace(self._now(), "<", reply)
        if parse is None:
            self.counters.exchanges += 1
            return None  # type: ignore[return-value]
        return self._parsed(text, parse, reply)

    def _parsed(self, text: str, parse: Callable[[str], T], reply: str) -> T:
        try:
            value = parse(reply)
        except ValueError as error:
            if not isinstance(error, NotANumber):
                self._session.distrust()
            raise BadReply(
                self.name, self.address, text, reply=reply, problem=str(error)
            ) from error
        self.counters.exchanges += 1
        return value

    async def _in_thread(self, text: str, job: Callable[[], Any]) -> Any:
        if self._worker is None:
            self._worker = Worker(f"link {self.name}")
        try:
            return await self._worker.run(job, self._stall_s)
        except asyncio.CancelledError:
            self._session.distrust()
            raise
        except TimeoutError:
            # The call hangs in the VISA library. Leave its thread, and begin with another.
            self._worker.stop()
            self._worker, identity = None, self._session.identity
            self._session.distrust()
            self._session = self._make_session()
            self._session.identity = identity
            raise Timeout(
                self.name,
                self.address,
                text,
                problem=f"the VISA call did not return within {self._stall_s:g} s",
                sent=True,
            ) from None

    async def _open(self) -> None:
        """Open the session; one attempt."""
        try:
            if self._inline:
                self._session.open()
            else:
                await self._in_thread("", self._session.open)
        finally:
            self.counters.opened = self._session.opened


async def open_link(
    manager: pyvisa.ResourceManager,
    address: str,
    *,
    name: str,
    timeout_s: float = 2.0,
    retries: int = 2,
    retry_pause_s: float = 0.1,
    inline: bool,
    identity_query: str = "*IDN?",
    write_end: str = "\n",
    read_end: str = "\n",
    gap_s: float = 0.0,
    serial: dict[str, Any] | None = None,
    trace: Trace | None = None,
    now: Callable[[], float] | None = None,
) -> Link:
    """Open a session and prove that something answers.

    Parameters
    ----------
    manager : pyvisa.ResourceManager
    address : str
        VISA address.
    name : str
        The instrument's name in the rig, for errors.
    timeout_s : float
        For one reply.
    retries : int
        Further attempts of a failed query.
    retry_pause_s : float
        Before each of them.
    inline : bool
        True makes VISA calls directly in the event loop: for rehearsals, where a clock that jumps
        would not see a thread's time; there a timeout is slept in the loop's time. False gives the
        session a thread of its own.
    identity_query : str
        A query whose answer never changes.
    write_end, read_end : str
        What ends a message and a reply.
    gap_s : float
        Least time between two messages.
    serial : dict, optional
        PyVISA attributes of a serial port, such as ``baud_rate``; not used elsewhere.
    trace : callable, optional
        Called in the event loop with time (s), ``">"``, ``"<"`` or ``"!"``, and text.
    now : callable, optional
        Time, s; the event loop's clock if left out.

    Raises
    ------
    LinkError
        Unreachable, Timeout, Closed or BadReply; nothing stays open.
    """
    settings = WireSettings(timeout_s, read_end.encode("ascii"), serial or {})

    def make_session() -> Session:
        return Session(
            manager,
            address,
            name=name,
            settings=settings,
            write_end=write_end.encode("ascii"),
            identity_query=identity_query,
        )

    link = Link(
        make_session,
        name=name,
        address=address,
        timeout_s=timeout_s,
        retries=retries,
        retry_pause_s=retry_pause_s,
        inline=inline,
        gap_s=gap_s,
        trace=trace,
        now=now,
    )
    try:
        await link._open()
    except BaseException:
        await link.close()
        raise
    return link
