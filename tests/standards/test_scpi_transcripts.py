"""IEEE 488.2 and SCPI-1999 from outside: line in, text out, errors out.

Error numbers and texts, event status bits and status byte bits: as two independent public
implementations of SCPI-1999 give them (the standard's own text was not read). Which number answers
which mistake is from memory of SCPI-1999 volume 2, chapter 21, unless said otherwise.
"""

import pytest

from simulators.front_panel import LINE_MAX, FrontPanel
from simulators.lockin import LockInParameters
from simulators.lockin_panel import LockInPanel
from simulators.magnet_panel import MagnetPanel
from simulators.status import QUEUE_LENGTH
from simulators.world import World, WorldParameters

MANDATORY = [
    "*CLS",
    "*ESE",
    "*ESE?",
    "*ESR?",
    "*IDN?",
    "*OPC",
    "*OPC?",
    "*RST",
    "*SRE",
    "*SRE?",
    "*STB?",
    "*TST?",
    "*WAI",
]


@pytest.fixture
def magnet() -> MagnetPanel:
    panel = MagnetPanel(World(WorldParameters(), lambda: 0.0))
    panel.execute("*CLS")
    return panel


@pytest.fixture
def lock_in() -> LockInPanel:
    world = World(WorldParameters(lock_ins=(LockInParameters("a"),)), lambda: 0.0)
    return LockInPanel(world, "a")


def errors(panel: FrontPanel) -> list[int]:
    """Empty the error queue."""
    numbers = []
    while (entry := panel.execute("SYST:ERR?")) and not entry.startswith("0,"):
        numbers.append(int(entry.partition(",")[0]))
    return numbers


@pytest.mark.parametrize("header", MANDATORY)
def test_mandatory_common_commands_are_understood(magnet: MagnetPanel, header: str) -> None:
    reply = magnet.execute(header + (" 0" if header in {"*ESE", "*SRE"} else ""))
    assert (reply is not None) == header.endswith("?")
    assert errors(magnet) == []


def test_identity_has_four_fields(magnet: MagnetPanel) -> None:
    fields = str(magnet.execute("*IDN?")).split(",")
    assert fields[:2] == ["NIGHTFIELD", "SIMULATED MAGNET SUPPLY"]
    assert len(fields) == 4
    assert all(fields)


SPELLINGS = [
    "SOUR:FIEL:LIM?",
    "SOURce:FIELd:LIMit?",
    "sour:field:lim?",
    ":SOURCE:FIEL:LIMIT?",
    "  sOuR:fIeL:LiM?  ",
    "SOUR1:FIEL1:LIM1?",
]


@pytest.mark.parametrize("line", SPELLINGS)
def test_header_short_long_any_case_and_root(magnet: MagnetPanel, line: str) -> None:
    assert magnet.execute(line) == "1.200000000E+01"
    assert errors(magnet) == []


IDENTITY = MagnetPanel(World(WorldParameters(), lambda: 0.0)).identity

TRANSCRIPTS: list[tuple[str, str | None, list[int]]] = [
    # compound messages: answers of one message in one line, joined by semicolons
    ("*OPC?;*OPC?", "1;1", []),
    ("SOUR:FIEL:TARG 2;TARG?", "2.000000000E+00", []),
    ("SOUR:FIEL:TARG 2;RATE 0.5;:SOUR:FIEL:TARG?;RATE?", "2.000000000E+00;5.000000000E-01", []),
    ("SOUR:FIEL:TARG 2;*OPC?;TARG?", "1;2.000000000E+00", []),  # common: path stays
    ("SOUR:FIEL:TARG?;SOUR:FIEL:TARG?", "0.000000000E+00", [-113]),  # path continues
    ("SOUR:FIEL:TARG?;:SOUR:FIEL:TARG?", "0.000000000E+00;0.000000000E+00", []),
    ("SOUR:FIEL:RAMP:STAT 1;STAT?", "1", []),
    ("*OPC?;", "1", []),
    ("", None, []),
    ("   ", None, []),
    # white space is ASCII 0 to 9 and 11 to 32: IEEE 488.2 7.4.1.2 (from memory)
    ("\x00\x07SOUR:FIEL:TARG\x1f3\x09;\x08TARG?", "3.000000000E+00", []),
    # numbers and units
    ("SOUR:FIEL:TARG 1500 MT;TARG?", "1.500000000E+00", []),
    ("SOUR:FIEL:TARG 1.5T;TARG?", "1.500000000E+00", []),
    ("SOUR:FIEL:TARG +15.E-1 t;TARG?", "1.500000000E+00", []),
    ("SOUR:FIEL:TARG -.5;TARG?", "-5.000000000E-01", []),
    ("SOUR:FIEL:TARG #H0A;TARG?", "1.000000000E+01", []),
    ("SOUR:FIEL:RATE 60 MT/MIN;RATE?", "1.000000000E-03", []),
    ("SOUR:FIEL:RATE 6 T/H;RATE?", "1.666000000E-03", []),  # floored to 1 uT/s
    ("SOUR:FIEL:TARG MAX;TARG?", "1.200000000E+01", []),
    ("SOUR:FIEL:TARG MINimum;TARG?", "-1.200000000E+01", []),
    ("SOUR:FIEL:TARG 3;TARG DEF;TARG?", "0.000000000E+00", []),
    ("SOUR:FIEL:TARG? MAX", "1.200000000E+01", []),
    ("SOUR:FIEL:RATE? MIN", "1.000000000E-06", []),
    ("SOUR:FIEL:RAMP:STAT ON;STAT?", "1", []),
    ("SOUR:FIEL:RAMP:STAT ON;STAT off;STAT?", "0", []),
    ("SOUR:FIEL:RAMP:STAT 2.4;STAT?", "1", []),
    # command errors
    ("FOO", None, [-113]),
    ("*FOO?", None, [-113]),
    ("SOUR:FIE:TARG 1", None, [-113]),
    ("SOUR:FIEL", None, [-113]),
    ("SOUR:FIEL:LIM 3", None, [-113]),
    ("*RST?", None, [-113]),
    ("SOUR2:FIEL:TARG?", None, [-114]),
    ("SOUR:FIEL:TARG", None, [-109]),
    ("SOUR:FIEL:TARG 1,2", None, [-108]),
    ("SOUR:FIEL:LIM? 1", None, [-108]),
    ("*CLS 1", None, [-108]),
    ("SOUR:FIEL:TARG 1,", None, [-109]),
    ("SOUR:FIEL:TARG,1", None, [-103]),
    ("SOUR::FIEL:TARG 1", None, [-102]),
    ("*OPC?;;*OPC?", "1", [-102]),
    ("?", None, [-102]),
    ("\x7f*IDN?", None, [-101]),
    ("\xa0*IDN?", None, [-101]),
    ("\xe9t\xe9", None, [-101]),
    ("SOUR:FIEL:TARG 1.2.3", None, [-121]),
    ("SOUR:FIEL:TARG #HXYZ", None, [-121]),
    ("SOUR:FIEL:TARG 1E40000", None, [-123]),
    ("SOUR:FIEL:TARG " + "1" * 300, None, [-124]),
    ("SOUR:FIEL:TARG 1 KG", None, [-131]),
    ("SOUR:FIEL:TARG 1 T/S", None, [-131]),
    ("*ESE 1 T", None, [-138]),
    ("SOUR:FIEL:TARG HIGH", None, [-141]),
    ("SOUR:FIEL:RAMP:STAT MAYBE", None, [-141]),
    ('SOUR:FIEL:TARG "1"', None, [-158]),
    ('SOUR:FIEL:TARG "1', None, [-151]),
    # blocks: what stands inside is no separator, and no parameter here takes one
    ("SOUR:FIEL:TARG #15a;b,c", None, [-168]),
    ("SOUR:FIEL:TARG #13a;b;TARG?", None, [-168]),
    ("SOUR:FIEL:TARG #19abc", None, [-161]),
    # *IDN? answers arbitrary text, so nothing may be asked behind it
    ("*OPC?;*IDN?;*OPC?", f"1;{IDENTITY}", [-440]),
    ("*IDN?;*CLS", IDENTITY, []),
    # execution errors: only the command itself is lost
    ("SOUR:FIEL:TARG 12.001;TARG?", "0.000000000E+00", [-222]),
    ("SOUR:FIEL:TARG -12.001", None, [-222]),
    ("SOUR:FIEL:TARG 1E400", None, [-222]),
    ("SOUR:FIEL:TARG NAN", None, [-222]),
    ("SOUR:FIEL:TARG INF", None, [-222]),
    ("SOUR:FIEL:RATE 0", None, [-222]),
    ("SOUR:FIEL:RATE -1", None, [-222]),
    ("*ESE 256;*ESE?", "0", [-222]),
    # a command error ends its message
    ("FOO;*OPC?", None, [-113]),
    ("*OPC?;FOO;*OPC?", "1", [-113]),
]


@pytest.mark.parametrize(("line", "reply", "numbers"), TRANSCRIPTS)
def test_transcript(magnet: MagnetPanel, line: str, reply: str | None, numbers: list[int]) -> None:
    # Twice, since the second time comes from the kept message.
    for _ in range(2):
        assert magnet.execute(line) == reply
        assert errors(magnet) == numbers
        magnet.execute("*RST")


def test_numeric_parameter_without_unit_is_rounded(lock_in: LockInPanel) -> None:
    assert lock_in.execute("SENS:FILT:ORD 2.6;ORD?") == "3"
    assert lock_in.execute("SENS:FILT:ORD 5;ORD?;:SYST:ERR:COUN?") == "3;1"


def test_hertz_takes_m_as_mega(lock_in: LockInPanel) -> None:
    """IEEE 488.2 suffix multipliers: MHZ is megahertz, though M is milli elsewhere (memory)."""
    assert lock_in.execute("SOUR:FREQ 0.01 MHZ;FREQ?") == "1.000000000E+04"


@pytest.mark.parametrize(
    ("line", "bit"),
    [("FOO", 32), ("SOUR:FIEL:TARG 99", 16), ("*IDN?" + " " * LINE_MAX, 8)],
)
def test_error_class_sets_its_event_bit(magnet: MagnetPanel, line: str, bit: int) -> None:
    magnet.execute(line)
    assert magnet.execute("*ESR?") == str(bit)
    assert magnet.execute("*ESR?") == "0"


def test_a_failed_self_test_is_a_device_error_with_its_number() -> None:
    world = World(WorldParameters(), lambda: 0.0)
    panel = MagnetPanel(world)
    assert panel.execute("*CLS;*TST?;*ESR?") == "0;0"
    world.quench()
    assert panel.execute("*TST?;*ESR?;:SYST:ERR?") == '1;8;-330,"Self-test failed"'


def test_a_key_pressed_at_the_instrument_sets_the_user_request_bit(magnet: MagnetPanel) -> None:
    magnet.status.user_request()
    assert magnet.execute("*ESR?;*ESR?") == "64;0"


def test_query_errors_set_bit_2(magnet: MagnetPanel) -> None:
    magnet.execute("*IDN?;*OPC?")
    assert magnet.execute("*ESR?") == "4"


def test_power_on_bit_is_set_once() -> None:
    panel = MagnetPanel(World(WorldParameters(), lambda: 0.0))
    assert panel.execute("*ESR?;*ESR?") == "128;0"


def test_error_queue_overflow_replaces_the_newest_by_350(magnet: MagnetPanel) -> None:
    for _ in range(QUEUE_LENGTH + 5):
        magnet.execute("FOO")
    assert magnet.execute("SYST:ERR:COUN?") == str(QUEUE_LENGTH)
    assert errors(magnet) == [-113] * (QUEUE_LENGTH - 1) + [-350]


def test_error_entry_is_number_and_quoted_text(magnet: MagnetPanel) -> None:
    assert magnet.execute("SYST:ERR?") == '0,"No error"'
    magnet.execute('FO"O')
    assert magnet.execute("SYST:ERR:NEXT?") == '-151,"Invalid string data;string without end"'


def test_cls_empties_queue_and_events(magnet: MagnetPanel) -> None:
    magnet.execute("FOO")
    assert magnet.execute("*CLS;*ESR?;:SYST:ERR?") == '0;0,"No error"'


def test_status_byte_summaries(magnet: MagnetPanel) -> None:
    """Bits 2 error queue, 4 message available, 5 event summary, 6 master summary."""
    assert magnet.execute("*STB?") == "0"
    assert magnet.execute("*OPC?;*STB?") == "1;16"
    magnet.execute("FOO")
    assert magnet.execute("*STB?") == "4"
    magnet.execute("*ESE 32")
    assert magnet.execute("*STB?") == "36"
    magnet.execute("*SRE 255")
    assert magnet.execute("*SRE?;*STB?") == "191;116"  # bit 6 cannot be enabled


def test_opc_sets_operation_complete(magnet: MagnetPanel) -> None:
    assert magnet.execute("*OPC;*ESR?") == "1"


def test_operation_register_latches_the_start_of_a_ramp() -> None:
    time_s = [0.0]
    panel = MagnetPanel(World(WorldParameters(), lambda: time_s[0]))
    panel.execute("SOUR:FIEL:TARG 1;RATE 0.5;RAMP:STAT 1")
    assert panel.execute("STAT:OPER:COND?") == "8"
    time_s[0] = 10.0
    assert panel.execute("STAT:OPER:COND?;EVEN?;EVEN?") == "0;8;0"
    panel.execute("STAT:OPER:ENAB 8;NTR 8;:SOUR:FIEL:TARG 2")
    time_s[0] = 20.0
    assert panel.execute("*STB?") == "128"
    panel.execute("STAT:PRES")
    assert panel.execute("STAT:OPER:ENAB?;NTR?;PTR?") == "0;0;32767"


def test_questionable_summary_reports_a_quench() -> None:
    world = World(WorldParameters(), lambda: 0.0)
    panel = MagnetPanel(world)
    panel.execute("STAT:QUES:ENAB 512;*CLS")
    assert panel.execute("*STB?") == "0"
    world.quench()
    assert panel.execute("*STB?;:STAT:QUES?;:STAT:QUES?;:STAT:QUES:COND?") == "8;512;0;512"


def test_headers_are_listed_in_a_definite_length_block(magnet: MagnetPanel) -> None:
    """SCPI-1999 SYSTem:HELP:HEADers?: block of lines, /qonly/ and /nquery/ marks (memory)."""
    block = str(magnet.execute("SYST:HELP:HEAD?"))
    digits = int(block[1])
    length = int(block[2 : 2 + digits])
    text = block[2 + digits :]
    assert block[0] == "#"
    assert len(text) == length
    lines = text.splitlines()
    assert ":SOURce:FIELd:TARGet" in lines
    assert ":MEASure:FIELd?/qonly/" in lines
    assert "*CLS/nquery/" in lines


def test_every_listed_query_answers(magnet: MagnetPanel) -> None:
    text = str(magnet.execute("SYST:HELP:HEAD?")).partition("*")[2]
    for line in ("*" + text).splitlines():
        if not line.endswith("/nquery/"):
            header = line.removesuffix("/qonly/").replace("[", "").replace("]", "").rstrip("?")
            assert magnet.execute(header + "?") is not None, header
    assert errors(magnet) == []
