"""A small TCP instrument that misbehaves on demand; in threads, so that a client may block."""

import contextlib
import socket
import struct
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass, field

IDENTITY = "NIGHTFIELD,FAKE INSTRUMENT,0001,1"


@dataclass(frozen=True)
class Answer:
    """What is done about one message.

    Attributes
    ----------
    pieces : tuple of bytes
        Sent one after the other, 2 ms apart.
    delay_s : float
        Before the first piece.
    close : bool
        Close the connection afterwards.
    reset : bool
        Close it with a reset.
    held : bytes
        Kept back, and sent in front of the answer to the next message, on whatever connection.
    """

    pieces: tuple[bytes, ...] = ()
    delay_s: float = 0.0
    close: bool = False
    reset: bool = False
    held: bytes = b""


def plain(message: str) -> Answer:
    """A healthy instrument: identity, ``N17?`` -> ``17``, no answer to what is no query."""
    if message == "*IDN?":
        return Answer((IDENTITY.encode() + b"\n",))
    if message.endswith("?"):
        return Answer((message.strip("N?").encode() + b"\n",))
    return Answer()


@dataclass
class FakeInstrument:
    """Listens on a free port; use as a context manager."""

    behaviour: Callable[[str], Answer] = plain
    messages: list[str] = field(default_factory=list)
    connections: int = 0
    _held: bytes = b""

    def __enter__(self) -> "FakeInstrument":
        self._listener = socket.create_server(("127.0.0.1", 0))
        self._clients: list[socket.socket] = []
        threading.Thread(target=self._accept, daemon=True).start()
        return self

    def __exit__(self, *_: object) -> None:
        with contextlib.suppress(OSError):  # wakes the thread that waits; else the port stays open
            self._listener.shutdown(socket.SHUT_RDWR)
        self._listener.close()
        self.drop_clients()

    @property
    def address(self) -> str:
        return f"TCPIP::127.0.0.1::{self._listener.getsockname()[1]}::SOCKET"

    def drop_clients(self) -> None:
        """Close every connection, as an instrument does when idle or switched off."""
        for client in self._clients:
            with contextlib.suppress(OSError):
                client.shutdown(socket.SHUT_RDWR)
            client.close()
        self._clients.clear()

    def said(self, message: str) -> int:
        """How often a message has come."""
        return self.messages.count(message)

    def _accept(self) -> None:
        with contextlib.suppress(OSError):
            while True:
                client, _ = self._listener.accept()
                client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
                self.connections += 1
                self._clients.append(client)
                threading.Thread(target=self._talk, args=(client,), daemon=True).start()

    def _talk(self, client: socket.socket) -> None:
        rest = b""
        with contextlib.suppress(OSError), client:
            while data := client.recv(4096):
                *lines, rest = (rest + data).split(b"\n")
                for line in lines:
                    self.messages.append(line.decode("ascii"))
                    if not self._answer(client, self.behaviour(line.decode("ascii"))):
                        return

    def _answer(self, client: socket.socket, answer: Answer) -> bool:
        pieces = list(answer.pieces)
        if answer.held:
            self._held += answer.held
        elif self._held and pieces:
            pieces[0], self._held = self._held + pieces[0], b""
        time.sleep(answer.delay_s)
        for index, piece in enumerate(pieces):
            if index:
                time.sleep(0.002)
            client.sendall(piece)
        if answer.reset:
            client.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        if answer.close and not answer.reset:
            client.shutdown(socket.SHUT_RDWR)
        return not (answer.close or answer.reset)
