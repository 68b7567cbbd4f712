"""At each field the lowest ceiling binds, by name; a stretch is as slow as its slowest point."""

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from orchestrator.config.rig import load_rig
from orchestrator.planning.ceilings import constant, eddy_heating, safety, with_more

RIG, _ = load_rig(Path(__file__).parents[2] / "sequences" / "rigs" / "demonstration.toml")
SAFETY = safety(RIG.magnet)
FIELDS = st.floats(-12, 12)


def test_the_magnet_table_binds_by_zone_and_an_edge_belongs_to_the_zone_below() -> None:
    rates, names = SAFETY.at(np.array([0.0, 6.0, 6.001, 9.0, -9.001, 12.0, 12.02]))
    per_min = rates * 60
    assert per_min == pytest.approx([0.6, 0.6, 0.3, 0.3, 0.12, 0.12, 0.0])
    assert set(names) == {"magnet table"}


def test_the_charge_voltage_binds_where_the_leads_take_their_share() -> None:
    weak = RIG.magnet.model_copy(update={"charge_voltage_max_v": 0.5})
    # (0.5 V - 1 mohm x 50 A) x 0.12 T/A / 20 H: Kirchhoff's law for the charged coil.
    assert safety(weak).over(0.0, 6.0) == (pytest.approx(0.45 * 0.12 / 20), "charge voltage")


def test_eddy_heating_binds_at_the_root_of_power_over_coefficient() -> None:
    rate, name = with_more(SAFETY, [eddy_heating(RIG.stage)]).over(0.0, 1.0)
    assert (rate, name) == (pytest.approx(0.01), "eddy heating") or name == "magnet table"
    assert rate**2 * RIG.stage.eddy_coefficient_w_s2_per_t2 <= RIG.stage.eddy_power_max_w * 1.000001


def test_the_sequence_binds_when_it_is_slowest() -> None:
    assert with_more(SAFETY, [constant("sequence", 1e-4)]).over(3.0, 12.0) == (1e-4, "sequence")


@given(FIELDS, FIELDS)
def test_a_stretch_is_never_faster_than_any_field_in_it(from_t: float, to_t: float) -> None:
    rate, _ = SAFETY.over(from_t, to_t)
    inside, _ = SAFETY.at(np.linspace(from_t, to_t, 101))
    assert rate <= inside.min() * (1 + 1e-12)
