"""What the screen says at a glance, at 80 by 24 and larger, on good nights and bad ones."""

import io
import math
import re
from typing import Any

import pytest
from rich.console import Console

from orchestrator.screen.dashboard import render
from orchestrator.screen.picture import Picture
from orchestrator.screen.verdict import Level, verdict
from orchestrator.screen.wording import clock, day, number_text, with_sd
from tests.screen.scenes import FINDING, MARGINS, NIGHT, ORBITS, Scene, begun, sweeping

SIZES = ((80, 24), (120, 40))


def picture_of(scene: Scene) -> Picture:
    picture = Picture()
    for message in scene.messages:
        picture.take(message)
    return picture


def frame(scene: Scene, width: int = 80, height: int = 24, later_s: float = 1.0) -> list[str]:
    """The lines of a frame, each without trailing blanks; checks that it fits."""
    file = io.StringIO()
    console = Console(file=file, width=width, height=height)
    console.print(
        render(picture_of(scene), now_unix_s=scene.unix_s + later_s, width=width, height=height)
    )
    lines = file.getvalue().splitlines()
    assert len(lines) <= height
    assert max(map(len, lines)) <= width
    return [line.rstrip() for line in lines]


def level(scene: Scene, later_s: float = 1.0) -> Level:
    return verdict(picture_of(scene), scene.unix_s + later_s).level


def row(lines: list[str], name: str) -> str:
    """The line that begins with a name."""
    (found,) = [line for line in lines if line.startswith(f" {name} ")]
    return found


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_a_good_night_says_so_first_and_then_what_it_does(width: int, height: int) -> None:
    """Every line that a person looks for, by its wording."""
    scene = sweeping()
    lines = frame(scene, width, height)
    assert lines[0].startswith(f" ALL IS WELL  lantern-cellar · {NIGHT} ")
    assert lines[0].endswith(" read 1 s ago")
    # Planned at 660 s for 3500 s, and now it is 2460 s: 1700 s are left, and 1200 s of parking.
    until = clock(scene.unix_s + 1700)
    assert row(lines, "doing").endswith(
        f"sweep-1: sweep from 3 to 12 T at 1.5 K, until {until} (28 min left)"
    )
    assert "1 of 4 steps done" in row(lines, "night")
    assert row(lines, "night").endswith(f"until {clock(scene.unix_s + 6500)} (1 h 48 min left)")
    assert "8.4000 T     rising 0.1800 T/min, bound by samples a period" in row(lines, "field")
    assert row(lines, "temperature").endswith("1.5000 K     set 1.5 K")
    assert row(lines, "helium").endswith("67.8 %       -1.80 %/h")
    assert row(lines, "resistance").endswith(" ohm   rxx")
    text = "\n".join(lines)
    assert "ramp-ceiling         █░░░░░░░░░ 0.12" in text
    assert "F 410.021 ± 0.012 T  m 0.18990 ± 0.00080 mₑ  T_D 1.302 ± 0.021 K  S/N 212" in text
    assert "F 1130.40 ± 0.31 T  mass: wants two temperatures  S/N 11" in text
    assert f"{clock(scene.unix_s - 1800, seconds=True)}  sweep-1 started" in text


def test_larger_screen_shows_a_plot_and_every_margin() -> None:
    """What the small one has no room for."""
    small, large = frame(sweeping()), frame(sweeping(), 120, 40)
    assert "background / ohm" not in "\n".join(small)
    assert "; 6 larger ones left out" in "\n".join(small)
    text = "\n".join(large)
    assert all(name in text for name in MARGINS)
    assert "resistance less a smooth background / ohm, sweep-1" in text
    (axis,) = [line for line in large if "1/field" in line]
    assert axis.split() == ["0.119", "1/field", "/", "(1/T)", "0.333"]
    assert "Hall density (2080.0 ± 3.0) × 10¹⁵ /m²" in text


def test_a_sweep_that_has_just_begun_is_drawn_as_it_is() -> None:
    """Until its background can be told from its oscillations: resistance against field."""
    scene = begun()
    scene.event("step", "sweep-1", phase="started", type="field-sweep")
    scene.run(90, "sweep-1", 3.0, 3.2)
    lines = frame(scene, 120, 40)
    assert "resistance / ohm, sweep-1" in "\n".join(lines)
    (axis,) = [line for line in lines if "field / T" in line]
    assert axis.split() == ["3.002", "field", "/", "T", "3.200"]


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_no_news_is_never_good_news(width: int, height: int) -> None:
    """Just below ten seconds all is well, beyond it every value is marked old."""
    assert level(sweeping(), 9.9) == Level.WELL
    lines = frame(sweeping(), width, height, later_s=200.0)
    assert level(sweeping(), 10.1) == Level.WAKE
    assert lines[0].startswith(" NO NEWS ")
    assert lines[0].endswith("LAST READ 3 min ago")
    assert lines[1].startswith(" ! nothing read for 3 min")
    for name in ("field", "temperature", "resistance", "helium"):
        assert row(lines, name).endswith("  OLD")


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_a_trip_wakes_until_it_is_acknowledged(width: int, height: int) -> None:
    """Name, answer, words, and what clears it; afterwards all is well again."""
    scene = sweeping()
    words = "helium at 24.9 % (allowed 25 % or more)"
    trip = scene.event("trip", "level-helium", words, severity="park")
    lines = frame(scene, width, height)
    assert lines[0].startswith(" WAKE UP ")
    assert lines[1] == " ! tripped: level-helium"
    text = "\n".join(lines)
    assert "nightfield acknowledge NIGHT TRIP --reason WHY" in text
    assert f"{clock(trip.unix_s, seconds=True)}  answered by park\n    {words}" in text
    assert f"TRIP level-helium: {words}" in text
    scene.event("acknowledge", "level-helium", "level-helium acknowledged by Ada: filled")
    assert level(scene) == Level.WELL
    assert "level-helium acknowledged by Ada: filled" in "\n".join(frame(scene, width, height))


def test_a_trip_that_only_the_state_tells_of_wakes_too() -> None:
    """A screen that came late has not seen the event."""
    scene = sweeping()
    scene.state(trips=("quench-flag",))
    assert frame(scene)[1] == " ! tripped: quench-flag"


@pytest.mark.parametrize(("width", "height"), SIZES)
def test_without_data_nothing_is_called_well(width: int, height: int) -> None:
    """Neither before the first message nor before the first reading."""
    for scene in (Scene(), begun()):
        lines = frame(scene, width, height)
        assert lines[0].startswith(" NO READING YET")
        assert row(lines, "doing").endswith("waiting for the first reading")
        assert "none yet; they come after each field sweep" in "\n".join(lines)


def test_things_to_look_at_are_named() -> None:
    """A silent instrument, an overload, a small margin, a late step; none of them wakes."""
    scene = sweeping()
    scene.run(5, "sweep-1", 8.4, 8.415, silent=("stage",))
    lines = frame(scene)
    assert lines[0].startswith(" HAVE A LOOK ")
    assert lines[1] == " ! stage silent for 5 s"
    assert row(lines, "temperature").endswith("SILENT for 5 s")
    scene = sweeping()
    scene.run(1, "sweep-1", 8.4, 8.403, rxx_overload=1.0)
    assert frame(scene)[1] == " ! rxx overloaded"
    assert row(frame(scene), "resistance").endswith("  OVERLOAD")
    scene = sweeping()
    scene.state(margins=MARGINS | {"level-helium": 0.049, "field-ceiling": 0.001})
    assert frame(scene)[1] == " ! close to a trip: level-helium"
    scene.state(margins=MARGINS | {"level-helium": 0.051, "over-temperature": None})
    assert level(scene) == Level.WELL
    assert "over-temperature     not known" in "\n".join(frame(scene))
    scene = sweeping()
    scene.run(2400, "sweep-1", 8.4, 8.5)
    assert frame(scene)[1] == " ! sweep-1 is 12 min late"


def test_the_end_of_a_night_and_its_loss_are_told_apart() -> None:
    """Ended well, ended by a trip, and a process that has vanished."""
    scene = sweeping()
    scene.event("night", "ended", "done", outcome="done", parked="parked")
    lines = frame(scene, later_s=5 * 86400)
    assert lines[0].startswith(" NIGHT OVER ")
    assert lines[0].endswith(f"last read {day(scene.unix_s)}")
    assert row(lines, "doing").endswith(f"ended {clock(scene.unix_s)}; the rig is parked")
    assert level(scene) == Level.OVER
    scene = sweeping()
    scene.event("night", "ended", "helium", outcome="level-helium", parked="parked")
    assert frame(scene)[1] == " ! ended by level-helium"
    assert level(scene) == Level.LOOK
    scene = sweeping()
    scene.state(outcome="lost")
    assert frame(scene)[:2][1] == " ! the night's process has vanished"
    assert level(scene) == Level.WAKE


def test_a_rig_that_is_not_at_rest_after_the_nights_end_wakes() -> None:
    """With what is not at rest in full, however narrow the terminal."""
    scene = sweeping()
    parked = "the magnet was not ramped to zero: magnet at TCPIP::a::1::SOCKET: connection refused"
    scene.event("night", "ended", "x", outcome="stale-magnet", parked=parked)
    lines = frame(scene, 60, 24)
    assert level(scene) == Level.WAKE
    assert lines[1:3] == [" ! THE RIG IS NOT AT REST", " ! ended by stale-magnet"]
    at = lines.index(next(one for one in lines if "NOT AT REST" in one and one.startswith(" rig")))
    assert " ".join(one.strip() for one in lines[at + 1 : at + 4]).startswith(parked)


def test_a_night_rehearsed_at_full_speed_tells_times_since_its_start() -> None:
    """It plays in the year 2000; neither that date nor an age of decades is of use to anybody."""
    scene = sweeping()
    scene.event("night", "ended", "done", outcome="done", parked="parked")
    decades_s = 26 * 365.25 * 86400
    lines = frame(scene, later_s=decades_s)
    assert lines[0].endswith("times since its start")
    told = "0:41:00"  # 660 s of settling and 1800 s of the sweep
    assert row(lines, "doing").endswith(f"ended after {told}; the rig is parked")
    assert any(line.startswith(f"  {told}  night ended") for line in lines)
    running = frame(sweeping(), later_s=decades_s)
    assert running[0].startswith(" REHEARSAL ")
    assert "it still runs, or was cut short" in running[1]
    assert not any(" h " in line and "nothing read" in line for line in running)


def test_an_instrument_that_is_silent_shows_what_it_said_last() -> None:
    """Where the field was is what somebody asks first at night."""
    scene = sweeping()
    before = picture_of(scene).values["field_t"]
    scene.run(20, "sweep-1", math.nan, math.nan, silent=("magnet",))
    assert f"last {before:.4f} T" in row(frame(scene), "field")


def test_a_narrow_terminal_keeps_the_time_until_which() -> None:
    """On 60 columns it goes to a line of its own."""
    lines = frame(sweeping(), 60, 24)
    at = lines.index(row(lines, "doing"))
    assert lines[at + 1].strip().startswith("until ")
    assert lines[at + 1].endswith("left)")


def test_a_rehearsal_that_runs_faster_tells_wall_time() -> None:
    """At ten seconds of the night a second of wall time, 1700 s are 170 s away."""
    scene = sweeping()
    picture = picture_of(scene)
    assert picture.newest is not None
    quick = [(t, unix / 10, m, f, k) for t, unix, m, f, k in picture.recent]
    picture.recent.extend(quick)
    assert math.isclose(picture.pace(), 0.1, rel_tol=1e-6)
    left_s = picture.unix_of(picture.step_ends_s()) - picture.newest.unix_s
    assert math.isclose(left_s, 170.0, rel_tol=1e-3)


def test_colours_only_repeat_what_words_say() -> None:
    """With NO_COLOR the words are the same and no colour is sent."""
    scene, texts = sweeping(), []
    for more in ({"NO_COLOR": "1"}, {}):
        file = io.StringIO()
        environment = {"TERM": "xterm-256color"} | more
        console = Console(file=file, width=80, height=24, force_terminal=True, _environ=environment)
        console.print(render(picture_of(scene), now_unix_s=scene.unix_s, width=80, height=24))
        texts.append(file.getvalue())
    colour = re.compile(r"\x1b\[[\d;]*[34]\d[\d;]*m")
    style = re.compile(r"\x1b\[[\d;]*m")
    assert not colour.search(texts[0])
    assert colour.search(texts[1])
    assert style.sub("", texts[0]) == style.sub("", texts[1])


def test_output_without_unicode_spells_signs_out() -> None:
    """As when it is piped into a file on a machine with an old code page; no plot, no failure."""
    scene = sweeping()
    file = io.TextIOWrapper(io.BytesIO(), encoding="ascii")
    console = Console(file=file, width=120, height=40)
    shown = render(
        picture_of(scene),
        now_unix_s=scene.unix_s,
        width=120,
        height=40,
        encoding=console.encoding,
    )
    console.print(shown)
    file.seek(0)
    text = file.read()
    assert "F 410.021 +- 0.012 T  m 0.18990 +- 0.00080 m_e" in text
    assert "ramp-ceiling         #......... 0.12" in text
    assert "?" not in text


def test_what_comes_cannot_command_the_terminal_or_break_the_screen() -> None:
    """Escape sequences, line breaks, markup and nonsense types, in every field that is shown."""
    scene = sweeping()
    evil = "a\x1b[2J\nb\r[red]c[/red]"
    scene.event("trip", evil, evil, severity=evil)
    scene.event("step", evil, evil, phase=evil, outcome=evil)
    scene.event("plan", evil, evil, legs=[[evil, None, 3, 4], 5], duration_s=evil)
    bad: list[Any] = [3, {"frequency_t": evil}, {"mass": {}, "frequency_t": True}]
    scene.finding(FINDING | {"orbits": bad, "after": evil, "problem": evil, "hall": {"a": 1}})
    for width, height in (*SIZES, (40, 10), (20, 3)):
        lines = frame(scene, width, height)
        assert not any("\x1b" in line or "\r" in line for line in lines)
    assert "a [2J b [red]c[/red]" in "\n".join(frame(scene))
    for strange in (7, "x", None, [1], {"a": 2}):
        scene.finding({"orbits": strange, "sweeps": strange, "hall": strange})
        frame(scene, 120, 40)


def test_another_night_begins_a_new_picture() -> None:
    """Nothing of the night before stays."""
    picture = picture_of(sweeping())
    for message in Scene("next").messages or [begun().messages[0]]:
        picture.take(message.model_copy(update={"night": "next"}))
    assert (picture.night, picture.newest, picture.finding, len(picture.events)) == (
        "next",
        None,
        None,
        1,
    )


def test_picture_stays_small_over_a_long_night() -> None:
    """20 000 readings of one step leave a bounded trace that still spans the whole sweep."""
    scene = sweeping()
    scene.run(20_000, "sweep-1", 8.4, 12.0)
    found = picture_of(scene).sweep_trace()
    assert found is not None
    name, field_t, ohm = found
    assert name == "sweep-1"
    assert 2000 <= len(field_t) == len(ohm) <= 4000
    assert field_t[0] < 3.1
    assert field_t[-1] > 11.99


def test_values_are_shown_to_two_digits_of_their_error() -> None:
    """And without an error to five."""
    assert with_sd(410.02134, 0.0123, "T") == "410.021 ± 0.012 T"
    assert with_sd(1130.4, 31.0, "T") == "1130 ± 31 T"
    assert with_sd(0.19, 0.1) == "0.19 ± 0.10"
    assert with_sd(410.02134, None, "T") == "410.02 T"
    assert with_sd(None, 1.0) == "-"
    assert with_sd(ORBITS[1]["mass"], None) == "-"
    assert number_text(-0.00001, 4, "T") == "0.0000 T"
    assert number_text(math.nan, 4, "T") == "- T"


def test_long_names_leave_the_age_of_the_reading_on_the_screen() -> None:
    """A night whose name is longer than the line."""
    scene = sweeping()
    for at, message in enumerate(scene.messages):
        scene.messages[at] = message.model_copy(update={"night": "long" * 40})
    line = frame(scene)[0]
    assert line.startswith(" ALL IS WELL  lantern-cellar · longlong")
    assert line.endswith("…  read 1 s ago")
