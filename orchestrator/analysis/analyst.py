"""The analyst: from the night's messages to findings, after every finished field sweep.

``python -m orchestrator.analysis.analyst --broker HOST:PORT --rig NAME`` is a process of its own.
It ends when its standard input closes, which is how it ends with the process that started it. It
is told nothing of what the sequence expects: the frequencies are found blind.
"""

import os

if __name__ == "__main__":  # numpy counts its threads when it loads; the night needs the cores
    os.environ.update({"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1", "MKL_NUM_THREADS": "1"})

import argparse
import asyncio
import contextlib
import signal
import sys
from collections.abc import Sequence
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from orchestrator.analysis.findings import OrbitFinding
from orchestrator.analysis.gathering import CutSweep, Gathering
from orchestrator.analysis.hall import analyse_hall
from orchestrator.analysis.ladder import analyse_ladder
from orchestrator.analysis.sweeps import AnalysisError
from orchestrator.children import until_owner_has_gone
from orchestrator.ledger.reading import NightReader
from orchestrator.stream.address import AddressError, BrokerAddress
from orchestrator.stream.messages import EventMessage, Message, ReadingBatch
from orchestrator.stream.subscriber import Subscriber

SOURCE = "analyst"

_CHUNK = 1000


@dataclass(frozen=True)
class Task:
    """All finished sweeps of a night, ready for the analysis, which may take seconds."""

    night: str
    sweeps: tuple[CutSweep, ...]

    def finding(self) -> dict[str, Any]:
        """What the sweeps show together.

        Returns
        -------
        dict
            ``after``: name of the newest sweep; ``sweeps``: how many were used; ``orbits``: fields
            of `OrbitFinding`; ``hall``: densities per m^2 and mobilities in m^2/(V s), or None;
            ``problem``: what could not be analysed and why, empty if nothing.
        """
        problems: list[str] = []
        used = [one for one in self.sweeps if _usable(one, problems)]
        orbits: list[OrbitFinding] = []
        if used:
            try:
                orbits = analyse_ladder([one.longitudinal for one in used if one.longitudinal])
            except Exception as error:  # a failed analysis is a finding too: that there is none
                problems.append(_said(error))
        return {
            "after": self.sweeps[-1].name if self.sweeps else "",
            "sweeps": len(used),
            "orbits": [asdict(orbit) for orbit in orbits],
            "hall": _hall(used, problems),
            "problem": "; ".join(problems),
        }


def _usable(sweep: CutSweep, problems: list[str]) -> bool:
    """Whether a sweep can be analysed; one that cannot must not take the others with it."""
    if sweep.longitudinal is None:
        problems.append(f'sweep "{sweep.name}": {sweep.problem}')
        return False
    try:
        sweep.longitudinal.lag_corrected()
    except Exception as error:
        problems.append(_said(error))
        return False
    return True


def _hall(cuts: Sequence[CutSweep], problems: list[str]) -> dict[str, Any] | None:
    problems += [
        f'Hall: sweep "{one.name}": {one.hall_problem}' for one in cuts if one.hall_problem
    ]
    sweeps = [one.hall for one in cuts if one.hall and not one.hall_problem]
    if not sweeps:
        return None
    try:
        found = analyse_hall(sweeps)
    except Exception as error:
        problems.append(f"Hall: {_said(error)}")
        return None
    return {
        "density_m2": found.density_m2,
        "density_sd_m2": found.density_sd_m2,
        "mobility_m2_per_vs": found.mobility_m2_per_vs,
        "mobility_sd_m2_per_vs": found.mobility_sd_m2_per_vs,
    }


def _said(error: Exception) -> str:
    text = str(error)
    return text if isinstance(error, AnalysisError) else f"{type(error).__name__}: {text}"


class Analyst:
    """Gathers a night's messages and analyses all its finished field sweeps after each.

    A night that is not the last message's begins anew. No message raises.
    """

    def __init__(self) -> None:
        self._gathering = Gathering()
        self._sweeps: list[CutSweep] = []
        self._new = False

    @property
    def night(self) -> str:
        """The night of the last message; empty before the first."""
        return self._gathering.night

    def collect(self, message: Message) -> None:
        """Take a message without analysing anything; quick."""
        if message.night != self.night:
            self._sweeps, self._new = [], False
        cut = self._gathering.take(message)
        self._sweeps += cut
        self._new = self._new or bool(cut)

    def due(self) -> Task | None:
        """The analysis that is due: one, however many sweeps have come since the last."""
        if not self._new or self._gathering.catching_up:
            return None
        self._new = False
        return Task(self.night, tuple(self._sweeps))

    def take(self, message: Message) -> list[dict[str, Any]]:
        """Take a message, and give the data of the finding that it leads to, if it does.

        See `Task.finding` for what it holds. The analysis may take seconds.
        """
        self.collect(message)
        task = self.due()
        return [] if task is None else [task.finding()]


def find_in_ledger(path: str | Path) -> dict[str, Any]:
    """What all finished sweeps of a night's ledger show, as the analyst would have found it.

    Parameters
    ----------
    path : str or Path
        The night's folder or its ledger.

    Returns
    -------
    dict
        As `Task.finding`.

    Raises
    ------
    LedgerError
        There is no ledger, or it cannot be read.
    """
    analyst = Analyst()
    with NightReader(path) as reader:
        night, rig = reader.description().night, reader.description().rig
        for event in reader.events():
            analyst.collect(EventMessage.of(event, night=night, rig=rig))
        after = 0
        while readings := reader.readings(after, _CHUNK):
            after = readings[-1].number
            analyst.collect(ReadingBatch.of(readings, reader.channels(), night=night, rig=rig))
    task = analyst.due()
    if task is None:
        return Task(night, ()).finding() | {"problem": "no field sweep has finished"}
    return task.finding()


async def serve(address: BrokerAddress, rig: str) -> None:
    """Listen and send findings until cancelled.

    The analysis runs in a thread, so that the connection is kept alive meanwhile. While it runs
    further sweeps may come; they are analysed together afterwards.
    """
    subscriber = Subscriber(address, rig=rig, from_start=True)
    analyst = Analyst()
    heard = asyncio.Event()

    async def listen() -> None:
        async for message in subscriber:
            analyst.collect(message)
            heard.set()

    async def work() -> None:
        while True:
            await heard.wait()
            heard.clear()
            task = analyst.due()
            if task is None:
                continue
            finding = await asyncio.to_thread(task.finding)
            if task.night == analyst.night:
                await subscriber.send_finding(SOURCE, finding)

    async with asyncio.TaskGroup() as group:
        group.create_task(listen())
        group.create_task(work())


async def _serve_until_ended(address: BrokerAddress, rig: str, alone: bool) -> None:
    loop = asyncio.get_running_loop()
    ended = asyncio.Event()
    for number in (signal.SIGINT, signal.SIGTERM):
        with contextlib.suppress(NotImplementedError):  # Windows
            loop.add_signal_handler(number, ended.set)
    serving = asyncio.create_task(serve(address, rig))
    tasks: list[asyncio.Task[Any]] = [serving, asyncio.create_task(ended.wait())]
    if not alone:
        tasks.append(asyncio.create_task(until_owner_has_gone()))
    await asyncio.wait(tasks, return_when=asyncio.FIRST_COMPLETED)
    for task in tasks:
        task.cancel()
    with contextlib.suppress(asyncio.CancelledError):
        await serving


_CREDENTIALS = ("NIGHTFIELD_BROKER_USERNAME", "NIGHTFIELD_BROKER_PASSWORD")


def main(arguments: list[str] | None = None) -> int:
    """Entry point of the analyst's process.

    User name and password come by the environment, which is not shown in lists of processes.
    """
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--broker", default="127.0.0.1:1883", help="HOST:PORT")
    parser.add_argument("--rig", required=True, help="whose night to analyse")
    parser.add_argument("--tls", action="store_true", help="encrypt the connection to the broker")
    parser.add_argument("--ca-file", type=Path, help="certificates to trust")
    parser.add_argument("--why-open", default="", help="why no password or TLS is needed")
    parser.add_argument("--alone", action="store_true", help="go on when standard input closes")
    given = parser.parse_args(arguments)
    host, _, port = given.broker.rpartition(":")
    try:
        address = BrokerAddress(
            host=host,
            port=int(port),
            username=os.environ.get(_CREDENTIALS[0]),
            password=os.environ.get(_CREDENTIALS[1]),
            tls=given.tls,
            ca_file=given.ca_file,
            why_open=given.why_open,
        )
        with asyncio.Runner(loop_factory=asyncio.SelectorEventLoop) as runner:
            runner.run(_serve_until_ended(address, given.rig, given.alone))
    except KeyboardInterrupt:
        pass
    except (AddressError, ValueError) as error:
        parser.error(f"--broker {given.broker} --rig {given.rig}: {error}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
