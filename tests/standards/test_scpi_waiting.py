"""Operations that take time: *OPC, *OPC? and *WAI, and what happens to messages meanwhile.

IEEE 488.2 chapters 6 and 12 (from memory): *OPC sets bit 0 of the event status register when all
pending operations are complete; *OPC? and *WAI hold everything behind them until then.
"""

import asyncio

import pytest
import pyvisa

from simulators.front_panel import Busy, FrontPanel
from simulators.magnet_panel import MagnetPanel
from simulators.panels import panels
from simulators.tcp import serve
from simulators.visa import attach
from simulators.world import World
from tests.simulators.rigs import Clock, quiet

SOCKET = "TCPIP0::magnet.sim::5025::SOCKET"
GPIB = "GPIB0::3::INSTR"
RAMP = "SOUR:FIEL:RATE 0.04;TARG 0.4;RAMP:STAT 1"  # 10 s to the target


@pytest.fixture
def clock() -> Clock:
    return Clock()


@pytest.fixture
def magnet(clock: Clock) -> MagnetPanel:
    panel = MagnetPanel(World(quiet(), clock))
    panel.execute("*CLS")
    return panel


def opened(panel: FrontPanel, address: str):  # type: ignore[no-untyped-def]
    manager = attach({address: panel})
    return manager.open_resource(
        address, read_termination="\n", write_termination="\n", timeout=1000
    )


def test_opc_sets_its_bit_only_when_the_ramp_has_ended(magnet: MagnetPanel, clock: Clock) -> None:
    magnet.execute("*ESE 1")
    magnet.execute(RAMP + ";*OPC")
    assert magnet.execute("*ESR?;*STB?") == "0;16"  # 16: the first answer is available
    clock.time_s = 9.9
    assert magnet.execute("*ESR?") == "0"
    clock.time_s = 10.1
    assert magnet.execute("*STB?") == "32"
    assert magnet.execute("*ESR?;*ESR?") == "1;0"


@pytest.mark.parametrize("forget", ["*CLS", "*RST"])
def test_cls_and_rst_give_up_an_opc_that_waits(
    magnet: MagnetPanel, clock: Clock, forget: str
) -> None:
    magnet.execute(RAMP + ";*OPC")
    magnet.execute(forget)
    clock.time_s = 20.0
    assert magnet.execute("*ESR?") == "0"


def test_a_query_behind_wai_is_answered_after_the_ramp(magnet: MagnetPanel, clock: Clock) -> None:
    with pytest.raises(Busy) as waiting:
        magnet.execute(RAMP + ";STAT?;*WAI;:MEAS:FIEL?")
    clock.time_s = 5.0
    with pytest.raises(Busy) as waiting_on:
        waiting.value.go_on()
    clock.time_s = 11.0
    assert waiting_on.value.go_on() == "1;4.000000000E-01"


def test_nothing_waits_when_nothing_is_pending(magnet: MagnetPanel) -> None:
    assert magnet.execute("SOUR:FIEL:TARG 1;*WAI;*OPC?;*OPC;*ESR?") == "1;1"


def test_the_stage_is_pending_until_it_has_settled(clock: Clock) -> None:
    panel = panels(World(quiet(), clock))["stage"]
    panel.execute("*CLS")
    panel.execute("SOUR:TEMP:SPO 2;:OUTP:HEAT:STAT 1;*OPC")
    assert panel.execute("*ESR?") == "0"
    clock.time_s = 600.0
    assert panel.execute("*ESR?") == "1"


def test_a_socket_client_gets_the_answer_when_it_is_due_and_the_rest_behind_it(
    magnet: MagnetPanel, clock: Clock
) -> None:
    link = opened(magnet, SOCKET)
    link.write(RAMP)
    link.write("*OPC?")
    link.write("SOUR:FIEL:TARG?")
    with pytest.raises(pyvisa.VisaIOError):
        link.read()
    clock.time_s = 10.5
    assert [link.read(), link.read()] == ["1", "4.000000000E-01"]


def test_device_clear_ends_the_wait(magnet: MagnetPanel) -> None:
    for address in (SOCKET, GPIB):
        link = opened(magnet, address)
        link.write(RAMP + ";*OPC?")
        link.clear()
        assert link.query("SOUR:FIEL:TARG?") == "4.000000000E-01"


def test_a_message_that_comes_while_an_answer_is_waited_for_interrupts_it(
    magnet: MagnetPanel, clock: Clock
) -> None:
    """IEEE 488.2 6.3.2.3 (from memory): INTERRUPTED, the first message's answer is lost."""
    link = opened(magnet, GPIB)
    link.write(RAMP + ";*OPC?")
    assert link.query("SYST:ERR?") == '-410,"Query INTERRUPTED"'
    clock.time_s = 20.0
    with pytest.raises(pyvisa.VisaIOError):
        link.read()


def test_a_serial_poll_asks_for_service_once_when_the_ramp_has_ended(
    magnet: MagnetPanel, clock: Clock
) -> None:
    """Bit 6 of a serial poll is RQS: set by a new reason, cleared by the poll (488.2, memory)."""
    link = opened(magnet, GPIB)
    link.write("*ESE 1;*SRE 32")
    link.write(RAMP + ";*OPC")
    assert link.read_stb() == 0
    clock.time_s = 10.5
    assert [link.read_stb(), link.read_stb()] == [32 + 64, 32]
    link.write("*STB?")
    assert link.read_stb() & 16
    assert link.read() == str(32 + 64)


def test_a_socket_has_no_serial_poll(magnet: MagnetPanel) -> None:
    with pytest.raises(pyvisa.VisaIOError, match="NSUP_OPER"):
        opened(magnet, SOCKET).read_stb()


def test_over_tcp_the_answer_comes_by_itself() -> None:
    async def talk() -> list[bytes]:
        loop = asyncio.get_running_loop()
        began_s = loop.time()
        served = await serve({"magnet": MagnetPanel(World(quiet(), lambda: loop.time() - began_s))})
        port = int(served.addresses["magnet"].split("::")[2])
        reader, writer = await asyncio.open_connection("127.0.0.1", port)
        writer.write(b"SOUR:FIEL:RATE 0.04;TARG 0.008;RAMP:STAT 1;*OPC?\nSOUR:FIEL:TARG?\n")
        lines = [await asyncio.wait_for(reader.readline(), 30) for _ in range(2)]
        assert loop.time() - began_s >= 0.2  # 8 mT at 0.04 T/s
        await served.close()
        return lines

    assert asyncio.run(talk()) == [b"1\n", b"8.000000000E-03\n"]


def test_what_waits_is_bounded(magnet: MagnetPanel, clock: Clock) -> None:
    link = opened(magnet, SOCKET)
    link.write(RAMP + ";*OPC?")
    for _ in range(30):
        link.write("*ESE 0" + " " * 4000)
    clock.time_s = 20.0
    assert link.read() == "1"
    assert link.query("SYST:ERR?") == '-363,"Input buffer overrun"'
    assert link.query("MEAS:FIEL?") == "4.000000000E-01"
