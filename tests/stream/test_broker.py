"""The stream over the real embedded broker: complete, indifferent to crashes, deaf to commands."""

import asyncio
import contextlib
import json
import subprocess
import sys
import time
from collections.abc import Awaitable, Callable, Iterator
from pathlib import Path

import aiomqtt
import psutil  # type: ignore[import-untyped]
import pytest

from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.writing import Ledger
from orchestrator.readings import Reading
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.broker import BrokerProcess, BrokerStartError, start_broker_process
from orchestrator.stream.messages import (
    KINDS,
    FindingMessage,
    Message,
    NightState,
    ReadingBatch,
    StateMessage,
    encode,
    topic_of,
)
from orchestrator.stream.publisher import Publisher
from orchestrator.stream.subscriber import Subscriber
from tests.ledger.invented import CHANNELS, DESCRIPTION, reading

NIGHT = DESCRIPTION.night


@pytest.fixture(scope="module")
def broker() -> Iterator[BrokerProcess]:
    with start_broker_process() as process:
        yield process


def new_ledger(folder: Path) -> Ledger:
    return Ledger.create(
        folder,
        description=DESCRIPTION,
        channels=CHANNELS,
        commit="each_second",
        clock=time.monotonic,
        wall=time.time,
    )


def append(ledger: Ledger, count: int) -> None:
    for number in range(ledger.last_number + 1, ledger.last_number + count + 1):
        ledger.append_reading(reading(number))
    ledger.commit()


def publisher_of(folder: Path, port: int, rig: str) -> Publisher:
    return Publisher(
        BrokerAddress(port=port), rig=rig, night=NIGHT, open_source=lambda: NightReader(folder)
    )


class Listening:
    """A subscriber whose messages are gathered by a task."""

    def __init__(self, port: int, rig: str, from_start: bool = True) -> None:
        self.subscriber = Subscriber(BrokerAddress(port=port), rig=rig, from_start=from_start)
        self.messages: list[Message] = []
        self._task = asyncio.create_task(self._gather())

    async def _gather(self) -> None:
        async for message in self.subscriber:
            self.messages.append(message)

    def readings(self) -> list[Reading]:
        batches = [m for m in self.messages if isinstance(m, ReadingBatch)]
        return [one for batch in batches for one in batch.readings()]

    def numbers(self) -> list[int]:
        return [one.number for one in self.readings()]

    def of_kind(self, kind: str) -> list[Message]:
        return [message for message in self.messages if message.kind == kind]

    async def until(self, done: Callable[[], bool], timeout_s: float = 60.0) -> None:
        await until(done, timeout_s)
        assert not self._task.done()

    async def close(self) -> None:
        self._task.cancel()
        with contextlib.suppress(asyncio.CancelledError):
            await self._task


async def until(done: Callable[[], bool], timeout_s: float = 60.0) -> None:
    """Wait for something to become true, and fail if it does not."""
    end_s = time.monotonic() + timeout_s
    while not done():
        assert time.monotonic() < end_s, "waited in vain"
        await asyncio.sleep(0.02)


def run(scene: Callable[[], Awaitable[None]]) -> None:
    """Run a scene on a selector loop, which aiomqtt needs on Windows."""
    with asyncio.Runner(loop_factory=asyncio.SelectorEventLoop) as runner:

        async def whole() -> None:
            await scene()

        runner.run(whole())


def test_readings_events_and_alarms_arrive_in_order_without_gaps(
    tmp_path: Path, broker: BrokerProcess
) -> None:
    """Also for one who comes late and asks for all, and for one who wants only what is new."""

    async def scene() -> None:
        ledger = new_ledger(tmp_path)
        publisher = publisher_of(tmp_path, broker.port, "in-order")
        publisher.update(NightState(step="up", step_number=1, step_count=3))
        early = Listening(broker.port, "in-order")
        publisher.start()
        append(ledger, 450)
        ledger.append_event(kind="step", name="up")
        ledger.append_event(kind="trip", name="helium_low", severity="high", data={"margin": 0.0})
        await early.until(lambda: len(early.numbers()) >= 450 and len(early.of_kind("alarm")) == 1)
        # The retained state says what is new from now on; it is sent every few seconds.
        publisher.update(NightState(step="up", step_number=1, step_count=3))
        await early.until(
            lambda: any(one.last_reading == 450 for one in early.of_kind("state"))  # type: ignore[attr-defined]
        )
        late = Listening(broker.port, "in-order")
        fresh = Listening(broker.port, "in-order", from_start=False)
        await late.until(lambda: len(late.numbers()) >= 450 and len(late.of_kind("event")) == 2)
        await fresh.until(lambda: fresh.subscriber.connected and bool(fresh.of_kind("state")))
        append(ledger, 10)
        publisher.update(NightState(step="down", step_number=2, step_count=3))
        for listening in (early, late, fresh):
            await listening.until(lambda one=listening: one.numbers()[-1:] == [460])  # type: ignore[misc]
            await listening.until(
                lambda one=listening: one.of_kind("state")[-1].state.step == "down"  # type: ignore[misc]
            )
        assert early.numbers() == late.numbers() == list(range(1, 461))
        assert fresh.numbers() == list(range(451, 461))
        assert [message.seq for message in early.of_kind("event")] == [1, 2]
        assert [message.seq for message in early.of_kind("alarm")] == [2]
        assert early.readings()[13].taken_s == reading(14).taken_s
        assert publisher.counts.resent >= 450
        assert publisher.counts.failures == 0
        for listening in (early, late, fresh):
            await listening.close()
        publisher.update(NightState(outcome="finished"))
        publisher.stop()
        assert not publisher.connected
        after = Listening(broker.port, "in-order", from_start=False)
        await after.until(lambda: bool(after.of_kind("state")))
        (state,) = after.of_kind("state")
        assert isinstance(state, StateMessage)
        assert (state.state.outcome, state.last_reading) == ("finished", 460)
        await after.close()
        ledger.close()

    run(scene)


def test_broker_killed_and_restarted_subscriber_has_every_reading_once(tmp_path: Path) -> None:
    """The night never notices; the ledger is the queue (safety promise 8, for the stream)."""

    async def scene() -> None:
        ledger = new_ledger(tmp_path)
        broker = await asyncio.to_thread(start_broker_process)
        publisher = publisher_of(tmp_path, broker.port, "crash")
        listening = Listening(broker.port, "crash")
        publisher.start()
        slowest_s = 0.0

        async def night(count: int) -> None:
            nonlocal slowest_s
            for _ in range(count):
                begun_s = time.monotonic()
                append(ledger, 20)
                publisher.update(NightState(step=f"at {ledger.last_number}"))
                slowest_s = max(slowest_s, time.monotonic() - begun_s)
                await asyncio.sleep(0.01)

        await night(30)
        await listening.until(lambda: len(listening.numbers()) > 0)
        killing = asyncio.create_task(asyncio.to_thread(broker.kill))
        await night(30)
        await killing
        append(ledger, 500)
        ledger.append_event(kind="step", name="while the broker was away")
        assert not await asyncio.to_thread(publisher_gone, publisher)
        broker = await asyncio.to_thread(start_broker_process, broker.port)
        await night(30)
        last = ledger.last_number
        await listening.until(
            lambda: listening.numbers()[-1:] == [last] and len(listening.of_kind("event")) == 1
        )
        assert listening.numbers() == list(range(1, last + 1))
        assert publisher.counts.connections >= 2
        assert slowest_s < 1.0
        await listening.close()
        publisher.stop()
        broker.stop()
        begun_s = time.monotonic()
        ledger.close()
        assert time.monotonic() - begun_s < 8.0

    run(scene)


def publisher_gone(publisher: Publisher) -> bool:
    return publisher._thread is None or not publisher._thread.is_alive()


def test_absent_broker_is_counted_and_stop_returns_at_once(tmp_path: Path) -> None:
    """No broker all night long: nothing raised, nothing blocked."""
    ledger = new_ledger(tmp_path)
    append(ledger, 5)
    publisher = publisher_of(tmp_path, 9, "absent")  # port 9, discard: nobody listens
    publisher.start()
    end_s = time.monotonic() + 5.0
    while publisher.counts.failures < 2 and time.monotonic() < end_s:
        time.sleep(0.02)
    assert publisher.counts.failures >= 2
    assert publisher.counts.last_error != ""
    begun_s = time.monotonic()
    publisher.stop()
    assert time.monotonic() - begun_s < 8.0
    assert publisher.counts.readings == 0
    ledger.close()


def test_findings_come_in_and_nothing_else_does(tmp_path: Path, broker: BrokerProcess) -> None:
    """Garbage on every topic, commands on invented ones: counted or unheard, the night goes on."""

    async def scene() -> None:
        ledger = new_ledger(tmp_path)
        publisher = publisher_of(tmp_path, broker.port, "deaf")
        listening = Listening(broker.port, "deaf")
        publisher.start()
        append(ledger, 3)
        await listening.until(lambda: listening.numbers() == [1, 2, 3])
        garbage = [b"", b"\xff", b"[" * 50_000, b'{"kind": "finding"}', b"SOUR:FIEL:TARG 20"]
        foreign = FindingMessage(night="another", rig="deaf", seq=1, source="x", data={})
        async with aiomqtt.Client("127.0.0.1", broker.port) as client:
            for kind in (*KINDS, "command", "hold", "request", "finding/deep"):
                for payload in garbage:
                    await client.publish(topic_of("deaf", kind), payload, qos=1)
            await client.publish(topic_of("deaf", "finding"), encode(foreign)[1], qos=1)
            command = {"instrument": "magnet", "operation": "write_target", "value": 20.0}
            await client.publish("nightfield/deaf/command", json.dumps(command), qos=1)
        await listening.subscriber.send_finding("analyst", {"orbits": [{"frequency_t": 320.0}]})
        got: list[FindingMessage] = []
        end_s = time.monotonic() + 8.0
        while not got and time.monotonic() < end_s:
            got = publisher.take_findings()
            await asyncio.sleep(0.02)
        assert [(one.source, one.data, one.seq) for one in got] == [
            ("analyst", {"orbits": [{"frequency_t": 320.0}]}, 1)
        ]
        append(ledger, 3)
        await listening.until(lambda: listening.numbers() == [1, 2, 3, 4, 5, 6])
        assert publisher.counts.garbage == 2 * len(garbage)  # finding and wanted alone are heard
        assert publisher.counts.foreign == 1
        assert listening.subscriber.counts.garbage == 5 * len(garbage)
        assert publisher.counts.failures == 0
        with NightReader(tmp_path) as reader:
            assert (reader.commands(), reader.requests(), reader.events()) == ([], [], [])
        await listening.close()
        publisher.stop()
        ledger.close()

    run(scene)


def test_findings_that_nobody_takes_are_bounded(tmp_path: Path) -> None:
    """The newest stay, the older ones are counted."""
    publisher = Publisher(
        BrokerAddress(),
        rig="r",
        night="n",
        open_source=lambda: NightReader(tmp_path),
        most_findings=3,
    )
    for seq in range(10):
        publisher._keep_finding(FindingMessage(night="n", rig="r", seq=seq, source="a", data={}))
    assert [one.seq for one in publisher.take_findings()] == [7, 8, 9]
    assert publisher.counts.findings_dropped == 7


def outcomes(listening: Listening) -> Iterator[str]:
    return (m.state.outcome for m in listening.messages if isinstance(m, StateMessage))


_NIGHT_PROCESS = """
import sys, time
from orchestrator.ledger.reading import NightReader
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.messages import NightState
from orchestrator.stream.publisher import Publisher
publisher = Publisher(BrokerAddress(port=int(sys.argv[1])), rig="dying", night=sys.argv[3],
    open_source=lambda: NightReader(sys.argv[2]))
publisher.update(NightState(step="up", outcome="running"))
publisher.start()
time.sleep(60)
"""


def test_last_will_is_seen_when_the_night_process_is_killed(
    tmp_path: Path, broker: BrokerProcess
) -> None:
    """The broker says that the night is lost, to those there and to those who come later."""

    async def scene() -> None:
        ledger = new_ledger(tmp_path)
        append(ledger, 3)
        ledger.close()
        listening = Listening(broker.port, "dying")
        arguments = [str(broker.port), str(tmp_path), NIGHT]
        dying = subprocess.Popen(  # noqa: ASYNC220
            [sys.executable, "-c", _NIGHT_PROCESS, *arguments]
        )
        await listening.until(lambda: bool(listening.of_kind("state")))
        dying.kill()
        dying.wait()
        late = Listening(broker.port, "dying", from_start=False)
        for one in (listening, late):
            await one.until(
                lambda one=one: list(outcomes(one))[-1:] == ["lost"]  # type: ignore[misc]
            )
            await one.close()
        assert next(outcomes(listening)) == "running"

    run(scene)


def test_clients_that_come_and_go_at_once_are_all_served(broker: BrokerProcess) -> None:
    """It walks the retained messages for each newcomer while others subscribe and leave."""

    async def visit(number: int) -> None:
        async with aiomqtt.Client("127.0.0.1", broker.port, timeout=3.0) as client:
            await client.subscribe(topic_of(f"visit-{number}", "reading"), qos=1)

    async def scene() -> None:
        async with aiomqtt.Client("127.0.0.1", broker.port, timeout=3.0) as standing:
            for number in range(20):
                topic = topic_of(f"standing-{number}", "state")
                await standing.subscribe(topic, qos=1)
                await standing.publish(topic, b"{}", qos=1, retain=True)
            for turn in range(3):
                await asyncio.gather(*(visit(10 * turn + number) for number in range(10)))

    run(scene)


def test_broker_listens_on_the_loopback_address_alone(broker: BrokerProcess) -> None:
    """Safety promise 9."""
    listening = [
        connection.laddr
        for connection in psutil.Process(broker.pid).net_connections("inet")
        if connection.status == psutil.CONN_LISTEN
    ]
    assert listening == [("127.0.0.1", broker.port)]


def test_broker_on_a_taken_port_says_so(broker: BrokerProcess) -> None:
    """The second broker ends with a plain sentence, and leaves no process."""
    with pytest.raises(BrokerStartError, match=f"did not start on 127.0.0.1:{broker.port}"):
        start_broker_process(broker.port)


def test_broker_ends_with_the_process_that_started_it() -> None:
    """The starter is killed without a chance to clean up."""
    script = (
        "import time; from orchestrator.stream.broker import start_broker_process as start\n"
        "print(start().pid, flush=True); time.sleep(60)"
    )
    starter = subprocess.Popen(
        [sys.executable, "-c", script], stdout=subprocess.PIPE, stdin=subprocess.DEVNULL, text=True
    )
    assert starter.stdout is not None
    pid = int(starter.stdout.readline())
    assert psutil.pid_exists(pid)
    starter.kill()
    starter.wait()
    starter.stdout.close()
    end_s = time.monotonic() + 6.0
    while running(pid) and time.monotonic() < end_s:
        time.sleep(0.05)
    assert not running(pid)


def running(pid: int) -> bool:
    try:
        return bool(psutil.Process(pid).status() != psutil.STATUS_ZOMBIE)
    except psutil.NoSuchProcess:
        return False
