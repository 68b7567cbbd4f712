"""What a person gets wrong in a file, and what is said: all of it at once, in plain words."""

from pathlib import Path

import pytest

from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig
from orchestrator.config.sequence import load_sequence
from orchestrator.config.world import load_world

SEQUENCES = Path(__file__).parents[2] / "sequences"
RIG = SEQUENCES / "rigs" / "demonstration.toml"
EVENING = SEQUENCES / "short-evening.toml"


def changed(file: Path, into: Path, *changes: tuple[str, str]) -> Path:
    """A copy of a file with texts replaced, each of which must be there."""
    text = file.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    copy = into / file.name
    copy.write_text(text, encoding="utf-8")
    return copy


def said_of_rig(file: Path) -> str:
    with pytest.raises(ConfigError) as caught:
        load_rig(file)
    return str(caught.value)


def said_of_sequence(file: Path) -> str:
    with pytest.raises(ConfigError) as caught:
        load_sequence(file, *load_rig(RIG))
    return str(caught.value)


def test_every_missing_limit_is_told_at_once_with_what_it_is_for(tmp_path: Path) -> None:
    """The promise of the safety page: the name of what is missing, and what it protects."""
    lines = RIG.read_text(encoding="utf-8").splitlines()
    keys = ("field_max =", "ramp_ceiling =", "temperature_trip =", "least =", "    {", "]")
    kept = [one for one in lines if not one.startswith(keys)]
    file = tmp_path / "rig.toml"
    file.write_text("\n".join(kept), encoding="utf-8")
    said = said_of_rig(file).splitlines()
    assert len(said) == 4
    for text, (key, purpose) in zip(
        said,
        (
            ("magnet.field_max", "within the field that it is made for"),
            ("magnet.ramp_ceiling", "so fast that it quenches"),
            ("stage.temperature_trip", "above it the night parks"),
            ("gauge[1].least", "before the cryostat is empty"),
        ),
        strict=True,
    ):
        assert f"{key}: is missing, and has no default; " in text
        assert purpose in text
        assert text.startswith(f"{file}, line ")


def test_a_misspelt_key_is_told_with_the_keys_that_there_are(tmp_path: Path) -> None:
    """It is missing as well, but that says less and is left out."""
    file = changed(RIG, tmp_path, ("field_max =", "feild_max ="))
    said = said_of_rig(file)
    assert 'line 17: magnet.feild_max = "12 T": is not a key of this table' in said
    assert "(allowed: address, dialect, field_max, coil_constant," in said
    assert "\n" not in said


def test_an_unknown_table_is_told_with_its_line(tmp_path: Path) -> None:
    said = said_of_rig(changed(RIG, tmp_path, ("[[gauge]]", "[[guage]]")))
    assert "line 67: guage = a list of 1: is not a key of this table" in said


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (('kind = "ladder"', 'kind = "lader"'), 'kind = "lader": is no kind that there is'),
        (('"nearest"', '"up"'), 'allowed: "as-given", "reversed", "both" or "nearest"'),
        (('["0.5 K", "1.8 K", "3.5 K"]', "[]"), "has too few entries (allowed: 1 or more)"),
        (('name = "sweep"', 'name = "My Sweep"'), "then small letters, digits and -, 48 at most"),
        (('to = "10 T"', 'to = "5 T"'), "the field would not move"),
        (('to = "10 T"', 'to = "5 bananas"'), "expected a unit like T; bananas is not a unit"),
        (("filter_loss = 0.05", 'rate_max = "0.3 T"'), "(allowed: above 0 T/min to 60 T/min)"),
    ],
)
def test_a_slip_in_a_sequence_is_told_in_words_of_the_trade(
    tmp_path: Path, change: tuple[str, str], said: str
) -> None:
    text = said_of_sequence(changed(EVENING, tmp_path, change))
    assert said in text
    assert f"{EVENING.name}, line " in text
    for word in ("Input", "validation", "pattern", "tag", "registry"):
        assert word not in text


def test_a_file_in_the_place_of_another_kind_is_told_as_that(tmp_path: Path) -> None:
    assert said_of_sequence(RIG).endswith(
        "is a rig file (line 4: [rig]); a sequence file is wanted here"
    )
    assert "is a sequence file (line 3: [sequence]); a rig file is wanted" in said_of_rig(EVENING)
    with pytest.raises(ConfigError, match=r"is a rig file .* a world file is wanted here"):
        load_world(RIG)
