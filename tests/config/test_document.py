"""Every key of a TOML file is found again on its line, and a broken file says where it broke."""

from pathlib import Path
from typing import Annotated

import pytest
from pydantic import ValidationError

from orchestrator.config.document import ConfigError, key_text, parse_document, read_document
from orchestrator.config.quantity import Quantity, Strict

TEXT = '''# a comment
[magnet]
field_max = "12 T"
ramp_ceiling = [
    { to = "6 T", rate = "0.6 T/min" },  # the first, with a ] in a comment

    { to = "12 T", rate = "0.1 T/min" },
]
note = """
[not.a.table]
x = 1
"""

[[lockin]]
name = "rxx"
[[lockin]]
name = "rxy"
[lockin.filter]
poles = 4
'''


def test_each_key_is_found_on_its_line() -> None:
    lines = parse_document("rig.toml", TEXT).lines
    assert lines[("magnet",)] == 2
    assert lines[("magnet", "field_max")] == 3
    assert lines[("magnet", "ramp_ceiling", 0)] == 5
    assert lines[("magnet", "ramp_ceiling", 1)] == 7
    assert lines[("magnet", "note")] == 9
    assert lines[("lockin", 1, "name")] == 17
    assert lines[("lockin", 1, "filter", "poles")] == 19
    assert ("not", "a", "table") not in lines


def test_an_unknown_key_falls_back_to_the_table_around_it() -> None:
    document = parse_document("rig.toml", TEXT)
    assert document.line_of(("magnet", "ramp_ceiling", 1, "rate")) == 7
    assert document.line_of(("absent",)) is None
    assert document.where("lockin", 1, "name") == "rig.toml, line 17 (lockin[2].name)"
    assert key_text(("step", 0, "to")) == "step[1].to"


def test_what_is_not_toml_is_refused_with_its_line() -> None:
    with pytest.raises(ConfigError, match=r"rig\.toml, line 2: .*not valid TOML") as caught:
        parse_document("rig.toml", "a = 1\nb = \n")
    assert caught.value.line == 2
    with pytest.raises(ConfigError, match="stands twice"):
        parse_document("rig.toml", "a = 1\na = 2\n")


def test_a_file_that_cannot_be_read_is_named(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"absent\.toml: cannot be read"):
        read_document(tmp_path / "absent.toml")
    strange = tmp_path / "strange.toml"
    strange.write_bytes(b"a = '\xff'")
    with pytest.raises(ConfigError, match="not UTF-8"):
        read_document(strange)


class _Magnet(Strict):
    field_max: Annotated[float, Quantity("T", above=0, most=45)]


def test_a_quantity_is_converted_and_bounded() -> None:
    assert _Magnet.model_validate({"field_max": "120 kG"}).field_max == pytest.approx(12.0)
    for given, words in [("0 T", "outside"), ("46 T", "outside"), ("5 K", "converts to T")]:
        with pytest.raises(ValidationError, match=words) as caught:
            _Magnet.model_validate({"field_max": given})
        assert caught.value.errors()[0]["ctx"]["allowed"] == "above 0 T to 45 T"


def test_an_unknown_key_is_refused() -> None:
    with pytest.raises(ValidationError, match="field_min"):
        _Magnet.model_validate({"field_max": "5 T", "field_min": "1 T"})
