"""Panels behind VISA, TCP and faults, seen by a client; and any bytes at all."""

import asyncio
import socket
import struct
import time

import numpy as np
import pytest
import pyvisa
from hypothesis import given, settings
from hypothesis import strategies as st
from pyvisa.constants import StatusCode

from simulators.exchange import LineAssembler
from simulators.faults import FaultyPanel
from simulators.front_panel import LINE_MAX, FrontPanel
from simulators.panels import panels
from simulators.tcp import Served, serve
from simulators.visa import attach
from simulators.world import World
from tests.simulators.rigs import Clock, quiet

SOCKET = "TCPIP0::magnet.sim::5025::SOCKET"
GPIB = "GPIB0::3::INSTR"


def rig() -> dict[str, FrontPanel]:
    return panels(World(quiet(), Clock()))


def opened(manager: pyvisa.ResourceManager, address: str):  # type: ignore[no-untyped-def]
    return manager.open_resource(
        address, read_termination="\n", write_termination="\n", timeout=5000
    )


# -- VISA ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("address", [SOCKET, "TCPIP::magnet.sim::5025::SOCKET", GPIB, "GPIB::3"])
def test_panel_answers_at_its_visa_address_however_it_is_written(address: str) -> None:
    manager = attach({address: rig()["magnet"]})
    (full,) = manager.list_resources("?*")
    for spelling in (address, full):
        assert opened(manager, spelling).query("SOUR:FIEL:LIM?;*OPC?") == "1.200000000E+01;1"
    manager.close()


def test_two_managers_in_one_process_share_nothing() -> None:
    first, second = (attach({SOCKET: rig()["magnet"]}) for _ in range(2))
    link_1, link_2 = opened(first, SOCKET), opened(second, SOCKET)
    link_1.write("SOUR:FIEL:TARG 3")
    assert link_1.query("SOUR:FIEL:TARG?") == "3.000000000E+00"
    assert link_2.query("SOUR:FIEL:TARG?") == "0.000000000E+00"
    first.close()
    assert link_2.query("*OPC?") == "1"
    second.close()


def test_unknown_address_and_doubled_address_are_refused() -> None:
    with pytest.raises(ValueError, match=r"two panels at the address GPIB0::3::INSTR"):
        attach({GPIB: rig()["magnet"], "GPIB::3::INSTR": rig()["stage"]})
    with pytest.raises(ValueError, match="'nowhere' is not a VISA address"):
        attach({"nowhere": rig()["magnet"]})
    manager = attach({})
    with pytest.raises(pyvisa.VisaIOError) as caught:
        opened(manager, GPIB)
    assert caught.value.error_code == StatusCode.error_resource_not_found


@pytest.mark.parametrize("address", [SOCKET, GPIB])
def test_timeout_comes_at_once_when_no_answer_is_due(address: str) -> None:
    manager = attach({address: rig()["magnet"]})
    link = opened(manager, address)
    start = time.perf_counter()
    with pytest.raises(pyvisa.VisaIOError) as caught:
        link.query("SOUR:FIEL:TARG 1")
    assert time.perf_counter() - start < 4.0  # the timeout is 5 s of virtual time
    assert caught.value.error_code == StatusCode.error_timeout
    assert link.query("SOUR:FIEL:TARG?") == "1.000000000E+00"


def test_message_exchange_reports_unterminated_and_interrupted_queries() -> None:
    """IEEE 488.2 6.3.2 (from memory): -420 reading with nothing asked, -410 asking twice."""
    link = opened(attach({GPIB: rig()["magnet"]}), GPIB)
    with pytest.raises(pyvisa.VisaIOError):
        link.read()
    assert link.query("SYST:ERR?") == '-420,"Query UNTERMINATED"'
    link.write("SOUR:FIEL:LIM?")
    link.write("*OPC?")
    assert link.read() == "1"
    assert link.query("*ESR?") == str(128 + 4)
    assert link.query("SYST:ERR?") == '-410,"Query INTERRUPTED"'


def test_socket_keeps_an_unread_answer_and_a_new_session_starts_empty() -> None:
    manager = attach({SOCKET: rig()["magnet"]})
    link = opened(manager, SOCKET)
    link.write("SOUR:FIEL:LIM?")
    assert link.query("*OPC?") == "1.200000000E+01"  # the trap that drivers must not fall into
    link.close()
    assert opened(manager, SOCKET).query("SYST:ERR?") == '0,"No error"'


def test_device_clear_forgets_unread_answers() -> None:
    manager = attach({SOCKET: rig()["magnet"], GPIB: rig()["stage"]})
    for address in (SOCKET, GPIB):
        link = opened(manager, address)
        link.write("*IDN?")
        link.clear()
        assert link.query("*OPC?") == "1"


def test_long_answers_arrive_in_small_reads() -> None:
    link = opened(attach({GPIB: rig()["magnet"]}), GPIB)
    link.write("*IDN?")
    parts = [link.read_bytes(7), link.read_raw()]
    assert b"".join(parts).startswith(b"NIGHTFIELD,SIMULATED MAGNET SUPPLY,")
    assert parts[0] == b"NIGHTFI"


# -- TCP -----------------------------------------------------------------------------------------


def port(served: Served, name: str) -> int:
    return int(served.addresses[name].split("::")[2])


async def asked(served: Served, name: str, data: bytes, lines: int = 1) -> list[bytes]:
    reader, writer = await asyncio.open_connection("127.0.0.1", port(served, name))
    writer.write(data)
    answers = [await asyncio.wait_for(reader.readline(), 5) for _ in range(lines)]
    writer.close()
    return answers


async def body_several_clients() -> None:
    served = await serve(rig())
    assert served.addresses["magnet"].startswith("TCPIP::127.0.0.1::")
    answers = await asyncio.gather(
        *(asked(served, n, b"*IDN?\n") for n in ("magnet", "stage", "xx", "helium", "magnet"))
    )
    models = [a[0].split(b",")[1] for a in answers]
    assert models[0] == models[4] == b"SIMULATED MAGNET SUPPLY"
    assert len(set(models)) == 4
    await served.close()
    await served.close()
    with pytest.raises(OSError):  # noqa: PT011 - the system's own wording
        await asyncio.open_connection("127.0.0.1", port(served, "magnet"))


async def body_partial_lines() -> None:
    served = await serve(rig())
    reader, writer = await asyncio.open_connection("127.0.0.1", port(served, "magnet"))
    for piece in (b"SOUR:FIE", b"L:LIM?\r", b"\n*OP", b"C?\n*OPC?;*OPC?\n"):
        writer.write(piece)
        await writer.drain()
        await asyncio.sleep(0.01)
    answers = [await asyncio.wait_for(reader.readline(), 5) for _ in range(3)]
    assert answers == [b"1.200000000E+01\n", b"1\n", b"1;1\n"]
    await served.close()
    assert await asyncio.wait_for(reader.read(), 5) == b""  # clients are let go


async def body_garbage_then_life() -> None:
    served = await serve(rig())
    noise = bytes(range(1, 10)) + bytes(range(11, 256))
    data = noise * (1024 * 1024 // len(noise)) + b"\nSYST:ERR?\n*OPC?\n"
    answers = await asked(served, "stage", data, lines=2)
    assert answers == [b'-363,"Input buffer overrun"\n', b"1\n"]
    await served.close()


async def body_blocks() -> None:
    served = await serve(rig())
    block = b'SOUR:FIEL:TARG #212ab\n;"#9\n,*RST\nSYST:ERR?\nSOUR:FIEL:LIM?\n'
    answers = await asked(served, "magnet", block, lines=2)
    assert answers == [b'-168,"Block data not allowed"\n', b"1.200000000E+01\n"]
    await served.close()


async def body_abrupt_close() -> None:
    served = await serve(rig())
    for _ in range(5):
        rude = socket.create_connection(("127.0.0.1", port(served, "xx")))
        rude.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        rude.sendall(b"*IDN?\n" * 100)
        rude.close()  # a reset, not an end
        await asyncio.sleep(0.01)
    assert await asked(served, "xx", b"*OPC?\n") == [b"1\n"]
    await served.close()


async def body_port_taken() -> None:
    first = await serve({"magnet": rig()["magnet"]})
    with pytest.raises(OSError):  # noqa: PT011 - the system's own wording
        await serve(rig(), {"stage": port(first, "magnet")})
    await first.close()


def test_several_clients_are_served_and_all_are_let_go() -> None:
    asyncio.run(body_several_clients())


def test_partial_lines_are_put_together() -> None:
    asyncio.run(body_partial_lines())


def test_a_mebibyte_of_garbage_is_one_error_and_the_panel_lives_on() -> None:
    asyncio.run(body_garbage_then_life())


def test_a_line_end_inside_a_block_belongs_to_the_block() -> None:
    asyncio.run(body_blocks())


def test_abrupt_closes_are_survived() -> None:
    asyncio.run(body_abrupt_close())


def test_a_taken_port_is_an_error_that_leaves_nothing_open() -> None:
    asyncio.run(body_port_taken())


# -- any bytes ------------------------------------------------------------------------------------

FRAGMENTS = st.sampled_from(
    [
        "*IDN?",
        "*RST",
        "SOUR:FIEL:TARG",
        "?",
        ";",
        ":",
        ",",
        " ",
        "1e5",
        "MT",
        "#H",
        '"',
        "\n",
        "MAX",
    ]
)
LIVE = rig()


@settings(max_examples=300, deadline=None)
@given(st.one_of(st.text(), st.lists(FRAGMENTS).map("".join)))
def test_no_text_makes_a_panel_raise_or_answer_in_other_than_ascii(line: str) -> None:
    for panel in LIVE.values():
        answer = panel.execute(line)
        assert answer is None or answer.isascii()
        for _ in range(20):
            entry = str(panel.execute("SYST:ERR?"))
            assert not entry.startswith("-310"), line
            if entry.startswith("0,"):
                break
        assert panel.execute("*OPC?") == "1"


def test_ten_thousand_lines_of_random_bytes_are_command_errors_and_leave_each_panel_alive() -> None:
    """Event status register: bit 5 for -1xx, bit 3 for -363, nothing else (IEEE 488.2)."""
    random = np.random.default_rng(20261201)
    every = rig()
    for number in range(10_000):
        panel = list(every.values())[number % len(every)]
        length = int(random.integers(1, 60)) if number % 100 else LINE_MAX + 1
        data = random.integers(0, 256, length, dtype=np.uint8).tobytes().replace(b"\n", b"")
        panel.execute("*CLS")
        assert LineAssembler(panel).feed(data + b"\n") == []
        event, entry = str(panel.execute("*ESR?;:SYST:ERR?")).split(";", 1)
        code = int(entry.partition(",")[0])
        if code == 0:
            assert not data.strip(bytes(range(33))), data
        else:
            assert (-199 <= code <= -100 and event == "32") or (code, event) == (-363, "8"), data
        assert panel.execute("*OPC?") == "1"


@settings(max_examples=100, deadline=None)
@given(st.lists(st.binary(max_size=300), max_size=8))
def test_no_bytes_in_any_pieces_stop_a_line_assembler(pieces: list[bytes]) -> None:
    lines = LineAssembler(LIVE["magnet"])
    whole = LineAssembler(LIVE["magnet"])
    LIVE["magnet"].execute("*CLS")
    in_pieces = [a for piece in pieces for a in lines.feed(piece)]
    LIVE["magnet"].execute("*CLS")
    at_once = whole.feed(b"".join(pieces))
    assert in_pieces == at_once
    assert lines.feed(b"\n*OPC?\n")[-1] == b"1\n"


def test_a_line_of_the_longest_length_is_still_read() -> None:
    panel = rig()["magnet"]
    lines = LineAssembler(panel)
    assert lines.feed(b"*OPC?".ljust(LINE_MAX) + b"\n") == [b"1\n"]
    assert lines.feed(b"*OPC?".ljust(LINE_MAX + 1) + b"\n") == []
    assert panel.execute("SYST:ERR?") == '-363,"Input buffer overrun"'


# -- faults ---------------------------------------------------------------------------------------


def faulty() -> FaultyPanel:
    return FaultyPanel(rig()["magnet"])


def test_healthy_faulty_panel_is_the_panel_itself() -> None:
    panel = faulty()
    assert panel.execute("SOUR:FIEL:TARG 1;TARG?") == "1.000000000E+00"
    panel.execute("FOO")
    assert panel.execute("SYST:ERR?") == '-113,"Undefined header;FOO"'


def test_silent_carries_out_and_deaf_does_not() -> None:
    panel = faulty()
    panel.silent = True
    assert panel.execute("SOUR:FIEL:TARG 1;TARG?") is None
    panel.silent, panel.deaf = False, True
    assert panel.execute("SOUR:FIEL:TARG 2;TARG?") is None
    panel.deaf = False
    assert panel.execute("SOUR:FIEL:TARG?") == "1.000000000E+00"


def test_late_answer_comes_in_front_of_the_next() -> None:
    panel = faulty()
    link = opened(attach({SOCKET: panel}), SOCKET)
    panel.late = True
    with pytest.raises(pyvisa.VisaIOError):
        link.query("SOUR:FIEL:LIM?")
    panel.late = False
    assert link.query("*OPC?") == "1.200000000E+01"
    assert link.read() == "1"


def test_garbled_frozen_ignored_and_wrong() -> None:
    panel = faulty()
    panel.garbled = True
    assert panel.execute("SOUR:FIEL:LIM?") == "~.~0~0~0~0~E~0~"
    panel.garbled, panel.frozen = False, True
    assert panel.execute("SOUR:FIEL:TARG?") == "0.000000000E+00"
    panel.execute("SOUR:FIEL:TARG 2")
    assert panel.execute("SOUR:FIEL:TARG?") == "0.000000000E+00"
    panel.frozen, panel.ignores_writes = False, True
    panel.execute("SOUR:FIEL:TARG 3")
    assert panel.execute("SOUR:FIEL:TARG?") == "2.000000000E+00"
    panel.replies["SOUR:FIEL:TARG?"] = "7"
    assert panel.execute("SOUR:FIEL:TARG?") == "7"
