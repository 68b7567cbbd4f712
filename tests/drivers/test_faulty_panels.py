"""Drivers against front panels that lie, freeze, fall silent or refuse, inside pyvisa-sim."""

import asyncio
from collections.abc import Awaitable, Callable, Coroutine

import pytest

from drivers.dialect import load_dialect
from drivers.errors import BadReply, LinkError, Timeout, WrongInstrument
from drivers.magnet_supply import ScpiMagnetSupply
from drivers.opening import open_gauge, open_lock_in, open_magnet_supply
from drivers.speaking import Lacking
from orchestrator.engine.clock import JumpingLoop
from simulators.faults import FaultyPanel
from simulators.panels import panels
from simulators.visa import attach
from simulators.world import World
from tests.simulators.rigs import Clock, quiet

SOCKET = "TCPIP0::magnet.sim::5025::SOCKET"
GPIB = "GPIB0::3::INSTR"
LOOK = (
    ":MEAS:FIEL?;:MEAS:CURR?;:MEAS:VOLT?;:SOUR:FIEL:RAMP:STAT?;:STAT:QUES:COND?"
    ";:OUTP:SWIT:HEAT?;:SOUR:FIEL:PERS?"
)
everywhere = pytest.mark.parametrize("address", [SOCKET, GPIB], ids=["socket", "gpib"])


async def supply(address: str = SOCKET) -> tuple[FaultyPanel, ScpiMagnetSupply]:
    panel = FaultyPanel(panels(World(quiet(), Clock()))["magnet"])
    magnet = await open_magnet_supply(
        attach({address: panel}),
        address,
        load_dialect("plain-scpi-magnet"),
        name="magnet",
        inline=True,
    )
    magnet.link._retry_pause_s = 0.0
    return panel, magnet


def rehearsed(body: Coroutine[None, None, None]) -> None:
    """Run on a clock that jumps, so that timeouts take no time of the wall."""
    with asyncio.Runner(loop_factory=JumpingLoop) as runner:
        runner.run(body)


def run(body: Callable[[FaultyPanel, ScpiMagnetSupply], Awaitable[None]], address: str) -> None:
    async def whole() -> None:
        panel, magnet = await supply(address)
        await body(panel, magnet)
        await magnet.close()

    rehearsed(whole())


@everywhere
def test_look_takes_one_exchange(address: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        before = magnet.link.counters.exchanges
        await magnet.read()
        assert magnet.link.counters.exchanges == before + 1

    run(body, address)


@everywhere
def test_replies_held_back_never_reach_a_later_query(address: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        for _ in range(3):
            panel.late = True
            with pytest.raises(Timeout):
                await magnet.read_target()
            panel.late = False
            assert await magnet.read_rate() > 0
            assert await magnet.read_target() == 0.0
            assert "MAGNET" in await magnet.identity()

    run(body, address)


@everywhere
def test_silence_is_a_timeout_and_life_goes_on_afterwards(address: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        panel.silent = True
        with pytest.raises(Timeout, match="magnet at"):
            await magnet.read()
        assert magnet.link.counters.timeouts == 3
        assert asyncio.get_running_loop().time() >= 6.0  # each waited its 2 s, on the night's clock
        panel.silent = False
        assert (await magnet.read()).field_t == 0.0

    run(body, address)


@everywhere
def test_garbled_reply_is_refused_by_its_query_and_text(address: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        panel.replies[":SOUR:FIEL:TARG?"] = "~.~0~0~0~0~E~0~"
        with pytest.raises(BadReply, match=r"magnet at .*TARG\?.*~\.~0.* is not a number"):
            await magnet.read_target()
        assert magnet.link.counters.retries == 2

    run(body, address)


@pytest.mark.parametrize(
    "word", ["NAN", "nan", "INF", "-INF", "NINF", "9.91E37", "9.9E+37", "1e999"]
)
def test_no_number_is_refused_without_asking_again(word: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        panel.replies[LOOK] = f"0;0;{word};0;0;0;0"
        with pytest.raises(BadReply, match="voltage") as caught:
            await magnet.read()
        assert caught.value.reply == f"0;0;{word};0;0;0;0"
        assert magnet.link.counters.retries == 0

    run(body, SOCKET)


@pytest.mark.parametrize(
    "reply",
    ["0;0;0;0;0;0", "0;0;0;0;0;0;0;0", "0;0;0;2;0;0;0", "0;0;0;0;1.5;0;0", "0;0;0;0;-1;0;0"],
)
def test_look_of_another_shape_is_refused(reply: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        panel.replies[LOOK] = reply
        with pytest.raises(BadReply):
            await magnet.read()

    run(body, SOCKET)


def test_write_that_the_instrument_ignores_shows_in_the_read_back() -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        panel.replies[":SOUR:FIEL:TARG 2.000000000E+00;:SOUR:FIEL:TARG?"] = "0.000000000E+00"
        assert (await magnet.write_target(2.0)).read_back == 0.0

    run(body, SOCKET)


def test_refused_write_shows_in_the_read_back_and_the_instrument_says_why() -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        written = await magnet.write_target(13.0)
        assert written.read_back == 0.0
        (complaint,) = await magnet.complaints()
        assert complaint.startswith("-222,")
        assert await magnet.complaints() == ()

    run(body, SOCKET)


@everywhere
def test_write_whose_reply_is_lost_is_not_sent_again_but_read_back(address: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        sent: list[str] = []
        inner = panel.panel.execute

        def execute(line: str) -> str | None:
            sent.append(line)
            answer = inner(line)
            return None if "TARG 2" in line else answer

        panel.panel.execute = execute  # type: ignore[method-assign]
        written = await magnet.write_target(2.0)
        assert written.read_back == 2.0
        assert sum("TARG 2" in line for line in sent) == 1

    run(body, address)


def test_value_that_is_not_finite_is_not_sent() -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        before = magnet.link.counters.exchanges
        for value in (float("nan"), float("inf")):
            with pytest.raises(ValueError, match=r"magnet: target: .* not finite"):
                await magnet.write_target(value)
        assert magnet.link.counters.exchanges == before

    run(body, SOCKET)


def test_wrong_instrument_is_refused_by_serial_number_and_by_kind() -> None:
    async def body() -> None:
        front = panels(World(quiet(), Clock()))
        manager = attach({SOCKET: front["magnet"], GPIB: front["helium"]})
        magnet, gauge = load_dialect("plain-scpi-magnet"), load_dialect("plain-scpi-gauge")
        with pytest.raises(WrongInstrument, match="expected 'SERIAL-99'") as caught:
            await open_magnet_supply(
                manager, SOCKET, magnet, name="magnet", inline=True, expected_identity="SERIAL-99"
            )
        assert caught.value.identity.startswith("NIGHTFIELD,SIMULATED MAGNET SUPPLY")
        with pytest.raises(WrongInstrument, match="SIMULATED GAUGE"):
            await open_magnet_supply(manager, GPIB, magnet, name="magnet", inline=True)
        opened = await open_gauge(
            manager, GPIB, gauge, name="helium", inline=True, expected_identity="simulated gauge"
        )
        await opened.close()
        with pytest.raises(ValueError, match="of a gauge, and a magnet is needed"):
            await open_magnet_supply(manager, GPIB, gauge, name="magnet", inline=True)

    rehearsed(body())


def test_setting_that_the_dialect_lacks_says_so() -> None:
    async def body() -> None:
        front = panels(World(quiet(), Clock()))
        dialect = load_dialect("plain-scpi-lockin")
        lock_in = await open_lock_in(
            attach({GPIB: front["xx"]}), GPIB, dialect, name="xx", inline=True
        )
        del lock_in._settings["frequency"]
        with pytest.raises(Lacking, match=r"xx at .* has no setting 'frequency'"):
            await lock_in.write_frequency(17.0)
        with pytest.raises(ValueError, match=r"xx: filter_order: 2\.5 is not a whole number"):
            await lock_in.write_filter_order(2.5)  # type: ignore[arg-type]
        with pytest.raises(ValueError, match="5 is outside 1 to 4"):
            await lock_in.write_filter_order(5)
        await lock_in.close()

    rehearsed(body())


def test_rehearsal_costs_no_time_of_the_loop() -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        loop = asyncio.get_running_loop()
        pending: list[object] = []
        loop.call_soon(pending.append, None)
        await magnet.read()
        await magnet.write_target(1.0)
        assert pending == []  # the loop was never given back: no thread, no wait

    run(body, SOCKET)


@everywhere
def test_settings_among_faults_are_right_or_refused(address: str) -> None:
    async def body(panel: FaultyPanel, magnet: ScpiMagnetSupply) -> None:
        wrong = refused = 0
        for number in range(300):
            panel.late = number % 7 == 3
            panel.silent = number % 11 == 5
            panel.garbled = number % 13 == 6
            target_t = number / 100
            try:
                written = await magnet.write_target(target_t)
                wrong += written.read_back != pytest.approx(target_t)
                wrong += (await magnet.read_target()) != pytest.approx(target_t)
            except LinkError:
                refused += 1
        assert wrong == 0
        assert 60 < refused < 120

    run(body, address)
