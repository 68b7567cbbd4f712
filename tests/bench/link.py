"""What our link costs a query, over the bare socket and over bare PyVISA."""

import asyncio
import contextlib
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from typing import Any

import pyvisa

from drivers.link import Link, open_link
from simulators.panels import panels
from simulators.visa import attach
from simulators.world import World, WorldParameters
from tests.bench.outcome import Outcome
from tests.bench.timing import in_turn

QUERY = "MEAS:FIEL?;CURR?;VOLT?"
SIMULATED = "TCPIP0::magnet.sim::5025::SOCKET"


@contextlib.contextmanager
def echo() -> Iterator[int]:
    """The echoing instrument's port."""
    command = [sys.executable, "-m", "tests.bench.echo"]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
        assert process.stdout is not None
        try:
            yield int(process.stdout.readline())
        finally:
            process.terminate()


def bare_queries(port: int, count: int) -> float:
    """Over a socket, with nothing between."""
    with socket.create_connection(("127.0.0.1", port)) as sock:
        sock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        reader = sock.makefile("rb")
        began_s = time.perf_counter()
        for _ in range(count):
            sock.sendall(QUERY.encode() + b"\n")
            reader.readline()
        return time.perf_counter() - began_s


def visa_queries(manager: pyvisa.ResourceManager, address: str, count: int) -> float:
    """Over PyVISA, as it comes."""
    resource: Any = manager.open_resource(address, read_termination="\n", write_termination="\n")
    began_s = time.perf_counter()
    for _ in range(count):
        resource.query(QUERY)
    seconds = time.perf_counter() - began_s
    resource.close()
    return seconds


def link_queries(manager: pyvisa.ResourceManager, address: str, count: int, inline: bool) -> float:
    """Over our link, in a thread or inline."""

    async def body() -> float:
        link: Link = await open_link(
            manager, address, name="bench", inline=inline, identity_query="*IDN?"
        )
        began_s = time.perf_counter()
        for _ in range(count):
            await link.query(QUERY)
        seconds = time.perf_counter() - began_s
        await link.close()
        return seconds

    return asyncio.run(body())


def run(quick: bool) -> Outcome:
    """Sockets through pyvisa-py, and panels inside pyvisa-sim."""
    count, rounds = (200, 3) if quick else (1500, 7)
    manager = pyvisa.ResourceManager("@py")
    front = panels(World(WorldParameters(seed=1), lambda: 0.0))["magnet"]
    simulated = attach({SIMULATED: front})
    with echo() as port:
        address = f"TCPIP::127.0.0.1::{port}::SOCKET"
        spent = in_turn(
            {
                "bare socket": lambda: bare_queries(port, count),
                "bare PyVISA, socket": lambda: visa_queries(manager, address, count),
                "link in a thread, socket": lambda: link_queries(manager, address, count, False),
                "link inline, socket": lambda: link_queries(manager, address, count, True),
                "bare PyVISA, pyvisa-sim": lambda: visa_queries(simulated, SIMULATED, count),
                "link in a thread, pyvisa-sim": lambda: link_queries(
                    simulated, SIMULATED, count, False
                ),
                "link inline, pyvisa-sim": lambda: link_queries(simulated, SIMULATED, count, True),
            },
            rounds,
        )
    manager.close()
    simulated.close()
    outcome = Outcome({f"{name}, us a query": one.per(count) for name, one in spent.items()})
    pairs = [
        ("link in a thread, socket", "bare socket"),
        ("link in a thread, socket", "bare PyVISA, socket"),
        ("link inline, socket", "bare PyVISA, socket"),
        ("bare PyVISA, socket", "bare socket"),
        ("link in a thread, pyvisa-sim", "bare PyVISA, pyvisa-sim"),
        ("link inline, pyvisa-sim", "bare PyVISA, pyvisa-sim"),
    ]
    for name, over in pairs:
        outcome.ratios[f"{name} / {over}"] = spent[name].over(spent[over])
    return outcome
