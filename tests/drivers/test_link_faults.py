"""Links against an instrument whose replies are late, lost, cut, doubled, garbled, or never end."""

import asyncio
import time

import pytest

from drivers import wire
from drivers.link import BadReply, Closed, Timeout
from tests.drivers.fake_instrument import IDENTITY, Answer, FakeInstrument, plain
from tests.drivers.links import modes, once, opened, run


@pytest.fixture
def any_library(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    """The way of pyvisa-py's sockets, or the way of every other VISA library, over pyvisa-py."""
    if request.param == "any":
        monkeypatch.setattr(wire, "_socket_of", lambda resource: None)


wires = pytest.mark.parametrize(
    ("inline", "any_library"),
    [(True, "pyvisa-py"), (False, "pyvisa-py"), (False, "any")],
    ids=["inline", "thread", "any library"],
    indirect=["any_library"],
)


# -- late, lost, cut, doubled, garbled ---------------------------------------------------------


@wires
def test_late_reply_is_never_given_to_the_next_query(inline: bool, any_library: None) -> None:
    async def body() -> None:
        late = once("N1?", Answer((b"1\n",), delay_s=0.15))
        with FakeInstrument(late) as fake:
            link = await opened(fake, inline, retries=0)
            with pytest.raises(Timeout):
                await link.query("N1?")
            await asyncio.sleep(0.1)
            assert await link.query("N2?") == "2"
            assert link.counters.opened == fake.connections == 2
            await link.close()

    run(body)


@wires
def test_reply_that_the_instrument_gives_later_on_a_new_connection_is_refused(
    inline: bool, any_library: None
) -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer(held=b"1\n"))) as fake:
            link = await opened(fake, inline, retries=0)
            with pytest.raises(Timeout):
                await link.query("N1?")
            assert await link.query("N2?") == "2"
            await link.close()

    run(body)


@wires
def test_lost_reply_is_asked_for_again_and_counted(inline: bool, any_library: None) -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer())) as fake:
            link = await opened(fake, inline)
            assert await link.query("N1?") == "1"
            assert fake.said("N1?") == 2
            counters = link.counters
            assert (counters.retries, counters.timeouts, counters.errors) == (1, 1, 1)
            await link.close()

    run(body)


@modes
def test_retries_are_bounded(inline: bool) -> None:
    async def body() -> None:
        def deaf(message: str) -> Answer:
            return plain(message) if message == "*IDN?" else Answer()

        with FakeInstrument(deaf) as fake:
            link = await opened(fake, inline, timeout_s=0.05, retries=3)
            start_s = time.monotonic()
            with pytest.raises(Timeout) as caught:
                await link.query("N1?")
            assert 0.2 <= time.monotonic() - start_s < 1.0
            assert fake.said("N1?") == 4
            assert caught.value.text == "N1?"
            assert caught.value.sent
            await link.close()

    run(body)


@modes
def test_reply_without_its_end_is_a_timeout_that_shows_what_came(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument(once("N123?", Answer((b"12",)))) as fake:
            link = await opened(fake, inline, retries=0)
            with pytest.raises(Timeout, match="it began with b'12'"):
                await link.query("N123?")
            assert await link.query("N4?") == "4"
            await link.close()

    run(body)


@wires
def test_reply_in_pieces_is_put_together(inline: bool, any_library: None) -> None:
    async def body() -> None:
        with FakeInstrument(once("N123?", Answer((b"1", b"2", b"3\r", b"\n")))) as fake:
            link = await opened(fake, inline)
            assert await link.query("N123?") == "123"
            assert link.counters.retries == 0
            await link.close()

    run(body)


@modes
def test_doubled_reply_is_refused_and_asked_for_again(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer((b"1\n1\n",)))) as fake:
            link = await opened(fake, inline)
            assert await link.query("N1?") == "1"
            assert fake.said("N1?") == 2
            assert await link.query("N2?") == "2"
            await link.close()

    run(body)


@wires
def test_copy_of_the_identity_after_reopening_is_waited_for(
    inline: bool, any_library: None
) -> None:
    async def body() -> None:
        with FakeInstrument() as fake:
            link = await opened(fake, inline)
            fake.behaviour = once("*IDN?", Answer(2 * (IDENTITY.encode() + b"\n",)))
            link._session.distrust()
            assert await link.query("N1?") == "1"
            assert fake.said("N1?") == 1
            assert link.counters.opened == 3
            await link.close()

    run(body)


@wires
def test_copy_of_a_reply_that_follows_later_is_not_the_next_reply(
    inline: bool, any_library: None
) -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer((b"1\n", b"1\n")))) as fake:
            link = await opened(fake, inline)
            assert await link.query("N1?") == "1"
            await asyncio.sleep(0.05)
            assert await link.query("N2?") == "2"
            assert link.counters.opened == 2
            await link.close()

    run(body)


@wires
def test_reply_outside_ascii_is_a_bad_reply(inline: bool, any_library: None) -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer((b"\xff1\n",)))) as fake:
            link = await opened(fake, inline, retries=0)
            with pytest.raises(BadReply, match="not ASCII") as caught:
                await link.query("N1?")
            assert caught.value.reply == "\\xff1"
            assert await link.query("N2?") == "2"
            await link.close()

    run(body)


@modes
def test_reply_that_never_ends_is_cut_off(inline: bool) -> None:
    async def body() -> None:
        with FakeInstrument(once("N1?", Answer((b"1" * (2 << 20),)))) as fake:
            link = await opened(fake, inline, retries=0, timeout_s=5.0)
            with pytest.raises(BadReply):
                await link.query("N1?")
            assert await link.query("N2?") == "2"
            await link.close()

    run(body)


# -- closed ----------------------------------------------------------------------------------


@modes
@pytest.mark.parametrize("reset", [False, True], ids=["end", "reset"])
@pytest.mark.parametrize("pieces", [(), (b"12",)], ids=["nothing", "part"])
def test_peer_that_closes_is_an_error_at_once_and_not_a_busy_wait(
    inline: bool, reset: bool, pieces: tuple[bytes, ...]
) -> None:
    async def body() -> None:
        answer = Answer(pieces, close=True, reset=reset)
        with FakeInstrument(once("N1?", answer)) as fake:
            link = await opened(fake, inline, retries=0, timeout_s=5.0)
            start_s, cpu_s = time.monotonic(), time.process_time()
            with pytest.raises(Closed):
                await link.query("N1?")
            assert time.monotonic() - start_s < 1.0
            assert time.process_time() - cpu_s < 0.5
            assert await link.query("N2?") == "2"
            await link.close()

    run(body)
