"""Links: opening, writes, closed peers, many at a time, cancelled and hung calls, bookkeeping."""

import asyncio
import contextlib
import socket
import sys
import threading
import time

import pytest

from drivers.link import (
    Closed,
    LinkError,
    Timeout,
    Unreachable,
    WrongInstrument,
    open_link,
)
from drivers.opening import visa_manager
from tests.drivers.fake_instrument import IDENTITY, Answer, FakeInstrument
from tests.drivers.links import modes, once, opened, run

# -- opening ---------------------------------------------------------------------------------


@modes
def test_opening_asks_who_is_there_and_queries_are_counted(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline)
            assert link.identity == IDENTITY
            assert [await link.query(f"N{i}?") for i in range(3)] == ["0", "1", "2"]
            await link.write("SET 1")
            counters = link.counters
            assert (counters.exchanges, counters.retries, counters.errors) == (4, 0, 0)
            assert counters.opened == fake.connections == 1
            await link.close()

    run(body)


@modes
def test_refused_port_is_told_at_once_with_its_reason(inline: bool) -> None:
    async def body() -> None:
        with socket.create_server(("127.0.0.1", 0)) as listener:
            port = listener.getsockname()[1]
        start_s = time.monotonic()
        with pytest.raises(Unreachable, match=r"magnet at TCPIP.*: connection failed: .*refused"):
            await open_link(
                visa_manager(), f"TCPIP::127.0.0.1::{port}::SOCKET", name="magnet", inline=inline
            )
        assert time.monotonic() - start_s < 1.0

    run(body)


@pytest.mark.skipif(sys.platform != "linux", reason="fills a listener's queue as Linux counts it")
def test_host_that_does_not_take_the_connection_is_unreachable_in_time() -> None:
    async def body() -> None:
        with socket.socket() as listener, contextlib.ExitStack() as crowd:
            listener.bind(("127.0.0.1", 0))
            listener.listen(0)
            port = listener.getsockname()[1]
            for _ in range(4):
                other = crowd.enter_context(socket.socket())
                other.setblocking(False)
                other.connect_ex(("127.0.0.1", port))
            start_s = time.monotonic()
            with pytest.raises(Unreachable, match=r"no connection within 0\.3 s"):
                await open_link(
                    visa_manager(),
                    f"TCPIP::127.0.0.1::{port}::SOCKET",
                    name="magnet",
                    inline=False,
                    timeout_s=0.3,
                )
            assert time.monotonic() - start_s < 2.0

    run(body)


@modes
def test_address_that_is_none_is_unreachable(inline: bool) -> None:
    async def body() -> None:
        with pytest.raises(Unreachable, match="magnet at nowhere") as caught:
            await open_link(visa_manager(), "nowhere", name="magnet", inline=inline)
        assert (caught.value.name, caught.value.address) == ("magnet", "nowhere")

    run(body)


@modes
def test_silence_at_opening_is_a_timeout(inline: bool) -> None:
    async def body() -> None:
        with (
            FakeInstrument(lambda message: Answer()) as fake,
            pytest.raises(Timeout, match=r"no reply within 0\.1 s"),
        ):
            await opened(fake, inline)

    run(body)


@modes
def test_connection_closed_while_idle_costs_neither_a_query_nor_a_write(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline, retries=0)
            for i in range(3):
                fake.drop_clients()
                await asyncio.sleep(0.02)
                await link.write(f"SET {i}")
                assert await link.query(f"N{i}?") == str(i)
                assert fake.said(f"SET {i}") == 1
            assert link.counters.errors == 0
            await link.close()

    run(body)


@modes
def test_instrument_that_went_away_is_unreachable(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline)
        await asyncio.sleep(0.02)
        with pytest.raises(Unreachable) as caught:
            await link.write("SET 1")
        assert not caught.value.sent
        await link.close()

    run(body)


@modes
def test_another_instrument_after_reopening_is_found_out(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline)
            fake.behaviour = lambda message: Answer((b"SOMEBODY ELSE\n",))
            fake.drop_clients()
            await asyncio.sleep(0.02)
            with pytest.raises(WrongInstrument) as caught:
                await link.query("N1?")
            assert caught.value.expected == IDENTITY
            assert caught.value.identity == "SOMEBODY ELSE"
            assert fake.said("N1?") == 0
            await link.close()

    run(body)


@modes
def test_closing_twice_is_safe_and_a_closed_link_says_so(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline)
            await link.close()
            await link.close()
            with pytest.raises(Closed, match="the link was closed"):
                await link.query("N1?")
            assert fake.said("N1?") == 0

    run(body)


# -- writes ----------------------------------------------------------------------------------


@modes
def test_message_that_sets_something_is_sent_once_whatever_happens(inline: bool) -> None:
    async def body() -> None:
        for answer in (Answer(), Answer(close=True), Answer((b"\xff\n",)), Answer((b"1\n1\n",))):
            with FakeInstrument(once("SET 1;N1?", answer)) as fake:
                link = await opened(fake, inline)
                with pytest.raises(LinkError) as caught:
                    await link.ask("SET 1;N1?", str, repeat=False)
                assert caught.value.sent
                assert await link.query("N2?") == "2"
                assert fake.said("SET 1;N1?") == 1
                await link.close()

    run(body)


@modes
def test_message_that_could_not_go_out_is_tried_again(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline)
            fake.behaviour = once("*IDN?", Answer())
            fake.drop_clients()
            await asyncio.sleep(0.02)
            await link.write("SET 1")
            assert await link.query("N1?") == "1"
            assert fake.said("SET 1") == 1
            assert link.counters.retries == 1
            await link.close()

    run(body)


# -- many at a time, cancelled, hung -----------------------------------------------------------


@modes
def test_exchanges_of_many_tasks_do_not_interleave(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            links = [await opened(fake, inline) for _ in range(3)]
            replies = await asyncio.gather(*(links[i % 3].query(f"N{i}?") for i in range(300)))
            assert replies == [str(i) for i in range(300)]
            for link in links:
                await link.close()

    run(body)


def test_cancelled_query_leaves_nothing_behind_for_the_next_and_does_not_hold_it_up() -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer((b"1\n",), delay_s=0.3))) as fake:
            link = await opened(fake, False, timeout_s=5.0)
            task = asyncio.create_task(link.query("N1?"))
            await asyncio.sleep(0.05)
            task.cancel()
            with pytest.raises(asyncio.CancelledError):
                await task
            start_s = time.monotonic()
            assert await link.query("N2?") == "2"
            assert time.monotonic() - start_s < 0.25
            await asyncio.sleep(0.3)
            assert await link.query("N3?") == "3"
            await link.close()

    run(body)


def test_call_that_never_returns_is_left_behind_in_its_thread() -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, False, retries=0)
            release = threading.Event()
            session = link._session
            session.exchange = lambda text, reply: str(release.wait())  # type: ignore[method-assign]
            link._stall_s = 0.1
            with pytest.raises(Timeout, match="did not return"):
                await link.query("N1?")
            assert await link.query("N2?") == "2"
            release.set()
            await link.close()

    run(body)


# -- bookkeeping -------------------------------------------------------------------------------


@modes
def test_trace_tells_time_direction_and_text(inline: bool) -> None:
    async def body() -> None:
        seen: list[tuple[float, str, str]] = []
        ticks = iter(range(100))
        with FakeInstrument(once("N2?", Answer(close=True))) as fake:
            link = await opened(
                fake,
                inline,
                retries=0,
                now=lambda: float(next(ticks)),
                trace=lambda *entry: seen.append(entry),
            )
            await link.query("N1?")
            await link.write("SET 1")
            with pytest.raises(Closed):
                await link.query("N2?")
            await link.close()
        assert [(d, t) for _, d, t in seen] == [
            (">", "N1?"),
            ("<", "1"),
            (">", "SET 1"),
            (">", "N2?"),
            ("!", "the instrument closed the connection"),
        ]
        assert [s for s, _, _ in seen] == sorted({s for s, _, _ in seen})

    run(body)


def test_least_gap_between_messages_is_kept() -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, True, gap_s=0.05)
            start_s = time.monotonic()
            for i in range(4):
                await link.query(f"N{i}?")
            assert time.monotonic() - start_s >= 0.15
            await link.close()

    run(body)
