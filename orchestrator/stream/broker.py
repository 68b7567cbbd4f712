"""The embedded broker: a process of its own that listens on the loopback address alone.

``python -m orchestrator.stream.broker --port 1883`` prints one line when it accepts connections.
Anyone on this machine may connect; nobody else can. It ends when its standard input closes, if
told so, which is how it ends with the process that started it.
"""

import argparse
import asyncio
import contextlib
import logging
import signal
import subprocess
import sys
import threading
from collections.abc import Iterator
from dataclasses import dataclass
from types import TracebackType
from typing import Any, Self

from orchestrator.children import start_child, until_owner_has_gone

HOST = "127.0.0.1"
_READY = "nightfield broker ready on port "


class _Steady(dict[str, Any]):
    """A dictionary whose iteration is not disturbed by what is added or removed meanwhile."""

    def __iter__(self) -> Iterator[str]:
        return iter(tuple(self.keys()))

    def items(self) -> Any:
        return tuple(super().items())


class BrokerStartError(Exception):
    """The embedded broker did not start; the message has what it said."""


def _configuration(port: int) -> dict[str, Any]:
    return {
        "listeners": {"default": {"type": "tcp", "bind": f"{HOST}:{port}", "max_connections": 100}},
        "plugins": {
            "amqtt.plugins.authentication.AnonymousAuthPlugin": {"allow_anonymous": True},
        },
    }


async def serve(port: int, until_stdin_closes: bool) -> None:
    """Run the broker until a signal, or until standard input closes."""
    from amqtt.broker import Broker  # slow to import, and needed in this process alone

    loop = asyncio.get_running_loop()
    ended = asyncio.Event()
    for number in (signal.SIGINT, signal.SIGTERM):
        with contextlib.suppress(NotImplementedError):  # Windows
            loop.add_signal_handler(number, ended.set)
    broker = Broker(_configuration(port))
    # amqtt 0.12 walks these while other clients come and go, and then leaves the one that is
    # connecting without an answer ("dictionary changed size during iteration").
    for name in ("_subscriptions", "_sessions", "_retained_messages"):
        setattr(broker, name, _Steady())
    await broker.start()
    # amqtt has no public way to learn the port chosen for port 0.
    instance = broker._servers["default"].instance
    print(f"{_READY}{next(iter(instance.sockets)).getsockname()[1]}", flush=True)
    waits: list[asyncio.Future[Any]] = [asyncio.ensure_future(ended.wait())]
    if until_stdin_closes:
        waits.append(asyncio.ensure_future(until_owner_has_gone()))
    await asyncio.wait(waits, return_when=asyncio.FIRST_COMPLETED)
    with contextlib.suppress(TimeoutError):
        await asyncio.wait_for(broker.shutdown(), timeout=2.0)


@dataclass
class BrokerProcess:
    """A broker that this process started; it ends with this process at the latest."""

    port: int
    pid: int
    process: "subprocess.Popen[bytes]"

    def stop(self) -> None:
        """End the broker; safe to call twice."""
        if self.process.stdin is not None and not self.process.stdin.closed:
            with contextlib.suppress(OSError):
                self.process.stdin.close()
        try:
            self.process.wait(timeout=4.0)
        except subprocess.TimeoutExpired:
            self.process.kill()
            self.process.wait()
        if self.process.stdout is not None:
            self.process.stdout.close()

    def kill(self) -> None:
        """End the broker without warning, as a crash would."""
        self.process.kill()
        self.process.wait()
        self.stop()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.stop()


def start_broker_process(port: int = 0, timeout_s: float = 20.0) -> BrokerProcess:
    """Start the embedded broker and wait until it accepts connections.

    Parameters
    ----------
    port : int
        Port on the loopback address; 0 lets the system choose.
    timeout_s : float
        How long to wait, in seconds of wall time.

    Raises
    ------
    BrokerStartError
        It ended or did not say that it is ready; usually the port is taken.
    """
    process = start_child(
        "orchestrator.stream.broker", ["--port", str(port), "--owned"], stdout=subprocess.PIPE
    )
    assert process.stdout is not None
    expiry = threading.Timer(timeout_s, process.kill)
    expiry.start()
    try:
        line = process.stdout.readline().decode("utf-8", "replace")
    finally:
        expiry.cancel()
    broker = BrokerProcess(port, process.pid, process)
    if not line.startswith(_READY):
        broker.stop()
        raise BrokerStartError(
            f"the embedded broker did not start on {HOST}:{port}; it said {line.strip()!r}"
        )
    broker.port = int(line.removeprefix(_READY))
    return broker


def main(arguments: list[str] | None = None) -> int:
    """Entry point of the broker's process."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--port", type=int, default=1883, help="0: the system chooses")
    parser.add_argument("--owned", action="store_true", help="end when standard input closes")
    given = parser.parse_args(arguments)
    logging.basicConfig(level=logging.CRITICAL)
    logging.getLogger("amqtt").setLevel(logging.CRITICAL)
    logging.getLogger("transitions").setLevel(logging.CRITICAL)
    try:
        asyncio.run(serve(given.port, given.owned))
    except KeyboardInterrupt:
        pass
    except Exception as error:  # amqtt raises a wide range; the parent reads this line
        print(f"the broker could not serve on {HOST}:{given.port}: {error}", flush=True)
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main())
