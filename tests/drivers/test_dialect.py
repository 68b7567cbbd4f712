"""Dialects: the shipped ones, the guide's worked example, and broken files told with their cure."""

import asyncio
import re
import textwrap
from pathlib import Path

import pytest

from drivers.__main__ import main
from drivers.capabilities import MagnetState
from drivers.dialect import DialectError, load_dialect, parse_dialect, shipped_dialects
from drivers.dialect_file import SerialSection, serial_attributes
from drivers.dialect_text import DialectText
from drivers.errors import BadReply, NotANumber
from drivers.kinds import VOCABULARIES
from drivers.opening import open_magnet_supply, visa_manager
from drivers.phrases import Template
from drivers.wire_units import factor_to_si
from drivers.wordings import Bit, Coded, Number, Switch, number
from tests.drivers.fake_instrument import Answer, FakeInstrument

FOLDER = Path(__file__).parents[2] / "drivers"
GUIDE = (FOLDER / "README.md").read_text(encoding="utf-8")
EXAMPLE = re.findall(r"```toml\n(.*?)```", GUIDE, re.S)[0]


# -- the shipped ones ----------------------------------------------------------------------------


def test_shipped_dialects_load_by_name_lack_nothing_and_join_a_look() -> None:
    assert shipped_dialects() == [
        "plain-scpi-gauge",
        "plain-scpi-lockin",
        "plain-scpi-magnet",
        "plain-scpi-temperature",
    ]
    for name in shipped_dialects():
        dialect = load_dialect(name)
        assert dialect.lacks == ()
        assert len(dialect.look().exchanges()) == 1
        assert set(dialect.settings()) == set(VOCABULARIES[dialect.kind].settings)


def test_name_that_is_none_lists_the_shipped_ones() -> None:
    with pytest.raises(DialectError, match=r"use one of plain-scpi-gauge, .*or the path"):
        load_dialect("nonesuch")
    with pytest.raises(DialectError, match=r"nonesuch\.toml: cannot be read"):
        load_dialect("nonesuch.toml")


# -- the worked example of the guide -------------------------------------------------------------


class CoilFeeder:
    """The supply of the guide's made-up manual page."""

    def __init__(self) -> None:
        self.amps, self.goal, self.pace, self.going, self.normal = 12.3456, 0.0, 0.6, False, False

    def __call__(self, line: str) -> Answer:
        word, _, value = line.removesuffix("\r").partition("=")
        if value:
            if word == "go":
                self.going = {"yes": True, "no": False}[value]
            else:
                assert re.fullmatch(r"-?\d+\.\d{4}", value)
                setattr(self, word, float(value))
            return Answer()
        flags = self.going + 4 * self.normal
        reply = {
            "who": "coil feeder 7, no. 42",
            "show": f"amps={self.amps:.4f} volts=0.1230 flags={flags}",
            "goal": f"goal {self.goal:.4f}",
            "pace": f"pace {self.pace:.4f}",
            "go": "going" if self.going else "staying",
        }[word]
        return Answer((reply.encode() + b"\r\n",))


def test_worked_example_of_the_guide_drives_the_instrument_of_its_manual(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "coil-feeder.toml"
    path.write_text(EXAMPLE, encoding="utf-8")
    dialect = load_dialect(path)
    assert dialect.lacks == ("switch_heater",)
    feeder = CoilFeeder()

    async def body(fake: FakeInstrument) -> None:
        magnet = await open_magnet_supply(
            visa_manager(),
            fake.address,
            dialect,
            name="coil",
            inline=False,
            expected_identity="no. 42",
            coil_constant_t_per_a=0.12,
            timeout_s=0.5,
        )
        state = await magnet.read()
        assert state == MagnetState(12.3456 * 0.12, 12.3456, 0.123, False, False, False, 0.0)
        written = await magnet.write_target(-6.0)
        assert written.sent == "goal=-50.0000"
        assert written.read_back == pytest.approx(-6.0)
        assert (await magnet.write_rate(0.002)).read_back == pytest.approx(0.002)
        assert feeder.pace == 1.0  # 0.002 T/s / 0.12 T/A * 60 s/min
        assert (await magnet.write_ramping(True)).read_back is True
        feeder.normal = True
        state = await magnet.read()
        assert state.ramping
        assert state.quench
        with pytest.raises(ValueError, match=r"coil: target: 108\.333333 A is outside -100 to 100"):
            await magnet.write_target(13.0)
        assert feeder.goal == -50.0
        await magnet.close()

    with FakeInstrument(feeder) as fake:
        asyncio.run(asyncio.wait_for(body(fake), 10))
        assert main([str(path), "--coil-constant", "0.12", "--address", fake.address]) == 0
    output = capsys.readouterr().out
    assert "goal={value}, then goal" in output
    assert "cannot set     switch_heater" in output
    assert "coil feeder 7, no. 42\nMagnetState(field_t=1.48" in output


def test_first_example_of_the_guide_runs(capsys: pytest.CaptureFixture[str]) -> None:
    replies = {"*IDN?": b"NIGHTFIELD,SIMULATED GAUGE,1,1\n", ":MEAS:LEV?": b"8.700000000E+01\n"}
    example = re.findall(r"```python\n(.*?)```", GUIDE, re.S)[0]
    with FakeInstrument(lambda line: Answer((replies[line],))) as fake:
        address = "TCPIP::127.0.0.1::5025::SOCKET"
        assert address in example
        exec(example.replace(address, fake.address), {})
    assert capsys.readouterr().out == "NIGHTFIELD,SIMULATED GAUGE,1,1 87.0\n"


def test_trying_a_dialect_tells_what_is_wrong(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "coil-feeder.toml"
    path.write_text(EXAMPLE, encoding="utf-8")
    assert main([str(path)]) == 1
    assert "A needs the magnet's coil constant" in capsys.readouterr().err
    assert main(["plain-scpi-gauge", "--address", "nowhere"]) == 2
    assert "gauge at nowhere: could not be opened" in capsys.readouterr().err


def test_reply_of_another_shape_is_refused() -> None:
    dialect = parse_dialect("example", DialectText("example.toml", EXAMPLE))
    ((message, parse),) = dialect.look(0.12).exchanges()
    assert message == "show"
    for reply in ("amps=1 volts=2", "amps=1 volts=2 flags=", "amps=x volts=2 flags=0", "", "1"):
        with pytest.raises(ValueError, match=r"shape|not a number"):
            parse(reply)


# -- broken files --------------------------------------------------------------------------------


def changed(old: str, new: str) -> str:
    assert old in EXAMPLE
    text: str = EXAMPLE.replace(old, new, 1)
    return text


BROKEN = {
    "no TOML": (changed("[identity]", "[identity"), r"line 6: is not valid TOML", "correct"),
    "key twice": (changed('query = "who"', 'query = "who"\nquery = "me"'), r"line 8.*TOML", ""),
    "unknown kind": (changed('"magnet"', '"magnets"'), r"line 2: dialect.kind = 'magnets'", ""),
    "unknown key": (
        changed("pause_s", "pause"),
        r"line 4: dialect.pause: is no key",
        r"kind, description, joins",
    ),
    "unknown table": (EXAMPLE + "[extra]\na = 1\n", r"extra: is no key", r"dialect, identity"),
    "wrong type": (changed("0.02", '"20 ms"'), r"line 4: dialect.pause_s = '20 ms'", "README"),
    "not finite": (changed("least = -100", "least = -inf"), r"set.target.least = -inf", "finite"),
    "line end": (changed('"\\r\\n"', '"\\t"'), r"line 3: dialect.write_end", ""),
    "pattern": (changed("no. \\\\d+", "no. (\\\\d+"), r"identity.pattern.*regular expr", ""),
    "no identity": (changed('query = "who"\n', ""), r"identity.query: is missing", "add it"),
    "no reads": (changed("[[read]]", "[reads]"), r"reads: is no key|read: is missing", ""),
    "read as a table": (changed("[[read]]", "[read]"), r"line 10: read = ", r"\[\[read\]\]"),
    "placeholder": (changed("{amps} ", "amps "), r"values.field: no reply .*\{amps\}", "from"),
    "unused": (changed("flags={flags}", "{more}={flags}"), r"read\[1\].reply.*\{more\}", r"\{_\}"),
    "touching": (changed("{amps} volts={volts}", "{amps}{volts}"), r"no text between", ""),
    "loose brace": (changed("flags={flags}", "{flags}}"), r"brace", ""),
    "value missing": (
        changed('voltage = { from = "volts", unit = "V" }\n', "").replace("{volts}", "{_}"),
        r"values: the value 'voltage' is missing",
        "always",
    ),
    "value unknown": (changed("voltage =", "tension ="), r"tension: a magnet has no such", "field"),
    "unit unknown": (changed('unit = "V"', 'unit = "volt"'), r"voltage.unit = 'volt'", "mV, kV, V"),
    "unit missing": (changed(', unit = "V"', ""), r"voltage.unit: has no unit", "one of"),
    "unit of a flag": (changed("bit = 0", 'unit = "A"'), r"ramping.unit: ramping is on or off", ""),
    "bit of a number": (changed('unit = "V"', "bit = 1"), r"voltage.bit: .*is a number", "remove"),
    "bit too high": (changed("bit = 2", "bit = 64"), r"quench.bit = 64", ""),
    "always of a flag": (changed("always = false", "always = 1.5"), r"switch_heater.always", ""),
    "setting missing": (
        EXAMPLE[: EXAMPLE.index("[set.ramping]")],
        r"set: the setting 'ramping' is missing",
        r"\[set.ramping\]",
    ),
    "setting unknown": (
        changed("[set.rate]", "[set.speed]"),
        r"line 32: set.speed",
        "target, rate",
    ),
    "no value": (changed("pace={value}", "pace"), r"set.rate.command = 'pace'.*value", ""),
    "two values": (changed("pace={value}", "{value}={value}"), r"contain \{value\} once", ""),
    "line end in it": (changed('"goal={value}"', '"goal={value}\\n"'), r"printable ASCII", ""),
    "form": (changed('".4f"', '"%.4f"'), r"set.target.form = '%.4f'", ""),
    "least above most": (changed("least = -100", "least = 101"), r"least = 101.0: is above", ""),
    "one word only": (changed('off = "no"\n', ""), r"only one of on and off", "give both"),
    "same words": (changed('off = "no"', 'off = "yes"'), r"on and off are the same", "differ"),
    "factor zero": (changed('unit = "V"', 'unit = "V", factor = 0'), r"must not be zero", ""),
    "codes": (
        changed('unit = "A/min"', 'unit = "A/min"\ncodes = { "1" = 2.0, "2" = 2.0 }'),
        r"set.rate.codes.*different values",
        "",
    ),
    "joined answers": (
        changed('kind = "magnet"', 'kind = "magnet"\njoins = ","').replace("} volts", "},volts"),
        r"contains ',', which separates joined answers",
        "leave out",
    ),
}


@pytest.mark.parametrize("case", BROKEN)
def test_broken_file_is_refused_with_place_and_cure(case: str) -> None:
    text, problem, cure = BROKEN[case]
    with pytest.raises(DialectError) as caught:
        parse_dialect("example", DialectText("example.toml", text))
    error = caught.value
    assert re.search(problem, str(error), re.S), str(error)
    assert re.search(cure, error.cure), str(error)
    assert error.cure
    assert str(error).startswith("example.toml")


def test_no_line_left_out_or_doubled_raises_anything_else() -> None:
    accepted = 0
    refused: list[DialectError] = []
    texts = [EXAMPLE] + [(p).read_text("utf-8") for p in (FOLDER / "dialects").glob("*.toml")]
    for text in texts:
        rows = text.splitlines()
        for index, row in enumerate(rows):
            for replacement in ([], [row, row], [row.replace('"', "")], [row.partition("=")[0]]):
                broken = "\n".join([*rows[:index], *replacement, *rows[index + 1 :]])
                try:
                    parse_dialect("x", DialectText("x.toml", broken))
                    accepted += 1
                except DialectError as error:
                    refused.append(error)
    assert len(refused) > 500
    assert all(error.problem and error.cure for error in refused)
    assert accepted > 50  # blank lines, comments, descriptions, settings that may be left out


def test_file_that_is_not_utf_8_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "bad.toml"
    path.write_bytes(b'[dialect]\nkind = "\xff"\n')
    with pytest.raises(DialectError, match="is not UTF-8 text"):
        load_dialect(path)


# -- words --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "value"),
    [("1", 1.0), ("+1.5E+01", 15.0), ("-.5", -0.5), (" 2. ", 2.0), ("1e-3", 1e-3)],
)
def test_numbers_of_ieee_488_2_are_read(text: str, value: float) -> None:
    """NR1, NR2 and NR3 (IEEE 488.2, from memory)."""
    assert number(text) == value


@pytest.mark.parametrize("text", ["", "1_000", "0x10", "1,5", "1 2", "١", "1e", "--1", "1.0V"])
def test_what_is_no_number_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match="is not a number"):
        number(text)


@pytest.mark.parametrize("text", ["nan", "INF", "-inf", "9.91E37", "+9.9E+37", "-9.9e37", "1e999"])
def test_what_stands_for_no_number_is_told_apart(text: str) -> None:
    """9.9E37 and 9.91E37 as infinity and not-a-number: SCPI-1999, from memory."""
    with pytest.raises(NotANumber):
        number(text)


@pytest.mark.parametrize(
    ("quantity", "unit", "si"),
    [
        ("field", "kG", 0.1),
        ("field", "mT", 1e-3),
        ("field", "A", 0.12),
        ("field rate", "kG/min", 0.1 / 60),
        ("field rate", "A/min", 0.12 / 60),
        ("field rate", "T/h", 1 / 3600),
        ("voltage", "uV", 1e-6),
        ("temperature", "mK", 1e-3),
        ("time", "ms", 1e-3),
        ("frequency", "kHz", 1e3),
        ("gauge", "fraction", 100.0),
        ("gauge", "mbar", 100.0),
    ],
)
def test_units_on_the_wire_against_their_definitions(quantity: str, unit: str, si: float) -> None:
    """1 G = 1e-4 T and 1 bar = 1e5 Pa by definition (SI Brochure, 9th edition; from memory)."""
    assert factor_to_si(quantity, unit, 0.12) == pytest.approx(si, rel=1e-15)


@pytest.mark.parametrize("coil", [None, 0.0, float("nan"), float("inf")])
def test_field_in_ampere_needs_a_coil_constant(coil: float | None) -> None:
    dialect = parse_dialect("example", DialectText("example.toml", EXAMPLE))
    with pytest.raises(DialectError, match=r"line 15: values\.field\.unit = 'A'.*coil_constant"):
        dialect.look(coil)


def test_codes_are_sent_and_read_and_nothing_between_them() -> None:
    coded = Coded({"0": 1e-5, "1": 3e-5, "12": 0.1})
    assert coded.encode(3e-5) == "1"
    assert coded.decode("+12") == 0.1
    with pytest.raises(ValueError, match=r"0\.05 is not offered .* which has 1e-05, 3e-05, 0\.1"):
        coded.encode(0.05)
    with pytest.raises(ValueError, match="'2' is none of the codes 0, 1, 12"):
        coded.decode("2")


def test_switches_and_bits() -> None:
    switch = Switch("ON", "OFF")
    assert [switch.decode(t) for t in ("on", "OFF")] == [True, False]
    assert Switch().decode("+1.0") is True
    assert [switch.encode(v) for v in (True, False)] == ["ON", "OFF"]
    with pytest.raises(ValueError, match="'1' is neither 'ON' nor 'OFF'"):
        switch.decode("1")
    with pytest.raises(ValueError, match="1 is neither True nor False"):
        switch.encode(1)
    assert [Bit(9).decode(t) for t in ("512", "511", "+5.12E+2")] == [True, False, True]
    assert Bit(0, inverted=True).decode("2") is True


def test_numbers_go_out_as_they_came_in() -> None:
    for form, rel in ((".9E", 1e-9), (".4f", 1e-3)):
        wording = Number(0.1, form)
        for value in (0.1234567891234, -7.0, 1.5):
            assert wording.decode(wording.encode(value)) == pytest.approx(value, rel=rel)


def test_template_takes_a_reply_apart() -> None:
    template = Template.of("{x},{_},{y}")
    assert template.parts(" 1.5,junk,-2 ") == {"x": "1.5", "_": "junk", "y": "-2"}
    for bad in ("1,2", "1,,", ""):
        with pytest.raises(ValueError, match="does not have the shape"):
            template.parts(bad)


def test_serial_settings_are_in_pyvisas_words() -> None:
    attributes = serial_attributes(SerialSection(baud_rate=19200, parity="even", stop_bits=2))
    assert attributes["baud_rate"] == 19200
    assert attributes["parity"].name == "even"
    assert attributes["stop_bits"].name == "two"
    assert serial_attributes(None) == {}


def test_setting_read_back_as_a_bit() -> None:
    text = textwrap.dedent(EXAMPLE).replace(
        'query = "go"\non = "yes"\noff = "no"\nreads_on = "going"\nreads_off = "staying"',
        'query = "show"\nreply = "{_}flags={value}"\non = "yes"\noff = "no"\nbit = 0',
    )
    setting = parse_dialect("x", DialectText("x.toml", text)).settings(0.12)["ramping"]
    assert setting.spelled(True) == "go=yes"
    assert setting.parse("amps=1.0 volts=0 flags=1") is True
    assert setting.parse("amps=1.0 volts=0 flags=4") is False


def test_bad_reply_shows_instrument_query_and_reply() -> None:
    error = BadReply("rxx", "GPIB0::1::INSTR", ":MEAS:XY?", reply="1;nan", problem="y: no number")
    assert str(error) == (
        "rxx at GPIB0::1::INSTR, message ':MEAS:XY?': bad reply '1;nan': y: no number"
    )
