"""Front panels behind TCP sockets, for other processes and other programs."""

import asyncio
import contextlib
import socket
from collections.abc import Mapping
from dataclasses import dataclass, field

from simulators.exchange import LineAssembler
from simulators.front_panel import FrontPanel

_CHUNK = 65536
_LOOK_S = 0.02


@dataclass
class Served:
    """Panels that are being served.

    Attributes
    ----------
    addresses : dict
        Panel name to VISA address, ``TCPIP::127.0.0.1::PORT::SOCKET``.
    """

    addresses: dict[str, str] = field(default_factory=dict)
    _servers: list[asyncio.Server] = field(default_factory=list)
    _talks: set[asyncio.Task[None]] = field(default_factory=set)

    async def close(self) -> None:
        """Stop listening and drop every client; safe to call twice."""
        for server in self._servers:
            server.close()
        for talk in list(self._talks):
            talk.cancel()
        await asyncio.gather(*self._talks, return_exceptions=True)
        for server in self._servers:
            await server.wait_closed()
        self._servers.clear()


async def serve(
    panels: Mapping[str, FrontPanel],
    ports: Mapping[str, int] | None = None,
    host: str = "127.0.0.1",
) -> Served:
    """Listen for each panel on a port of its own.

    Parameters
    ----------
    panels : mapping of str to FrontPanel
        Name to panel. Several clients of one panel share its error queue and settings.
    ports : mapping of str to int, optional
        Name to port; a panel without an entry gets a free one.
    host : str
        Address to listen on. The panels ask for no password: keep it the loopback address.

    Returns
    -------
    Served
        Addresses, and `close`.

    Raises
    ------
    OSError
        A port is taken.
    """
    served = Served()
    try:
        for name, panel in panels.items():
            server = await _listen(served, panel, host, (ports or {}).get(name, 0))
            port = server.sockets[0].getsockname()[1]
            served.addresses[name] = f"TCPIP::{host}::{port}::SOCKET"
    except BaseException:
        await served.close()
        raise
    return served


async def _listen(served: Served, panel: FrontPanel, host: str, port: int) -> asyncio.Server:
    async def talk(reader: asyncio.StreamReader, writer: asyncio.StreamWriter) -> None:
        task = asyncio.current_task()
        assert task is not None
        served._talks.add(task)
        try:
            await _talk(panel, reader, writer)
        except (ConnectionError, asyncio.CancelledError):
            pass  # the client left, or the server closes: either way this talk is over
        finally:
            served._talks.discard(task)
            writer.close()
            with contextlib.suppress(ConnectionError):
                await writer.wait_closed()

    server = await asyncio.start_server(talk, host, port)
    served._servers.append(server)
    return server


async def _talk(
    panel: FrontPanel, reader: asyncio.StreamReader, writer: asyncio.StreamWriter
) -> None:
    sock = writer.get_extra_info("socket")
    sock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    lines = LineAssembler(panel)
    while True:
        try:
            # While a message waits for an operation, its answer is looked after meanwhile.
            async with asyncio.timeout(_LOOK_S if lines.busy else None):
                data = await reader.read(_CHUNK)
        except TimeoutError:
            answers = lines.go_on()
        else:
            if not data:
                return
            answers = lines.feed(data)
        for answer in answers:
            writer.write(answer)
        await writer.drain()
