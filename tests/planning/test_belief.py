"""What is held of the sample: findings replace the prior, and nothing else does."""

import math

import pytest

from orchestrator.planning.belief import Belief, OrbitBelief

PRIOR = Belief((OrbitBelief(400.0, 40.0, 0.2, 1.0), OrbitBelief(1100.0, 110.0, 0.4, 0.8)))


def test_a_finding_takes_the_place_of_the_orbit_that_it_belongs_to() -> None:
    after = PRIOR.with_findings(
        [
            {
                "frequency_t": 1133.0,
                "frequency_sd_t": 0.5,
                "mass": 0.43,
                "mass_sd": 0.01,
                "dingle_k": 0.7,
            }
        ]
    )
    assert after.orbits == (PRIOR.orbits[0], OrbitBelief(1133.0, 0.5, 0.43, 0.7))


def test_mass_and_dingle_temperature_that_were_not_found_stay() -> None:
    after = PRIOR.with_findings(
        [{"frequency_t": 420.0, "frequency_sd_t": 1.0, "mass": None, "dingle_k": math.nan}]
    )
    assert after.orbits[0] == OrbitBelief(420.0, 1.0, 0.2, 1.0)


@pytest.mark.parametrize(
    "nonsense",
    [{}, {"frequency_t": -5.0}, {"frequency_t": math.nan}, {"frequency_t": "400"}, {"mass": 1.0}],
)
def test_a_finding_without_a_usable_frequency_changes_nothing(nonsense: dict[str, object]) -> None:
    assert PRIOR.with_findings([nonsense]) == PRIOR


def test_an_orbit_that_nobody_expected_is_added_only_if_it_needs_no_denser_samples() -> None:
    slow = PRIOR.with_findings([{"frequency_t": 700.0, "frequency_sd_t": 2.0}])
    assert [one.frequency_t for one in slow.orbits] == [400.0, 1100.0, 700.0]
    assert slow.frequency_most_t == PRIOR.frequency_most_t
    assert PRIOR.with_findings([{"frequency_t": 5000.0, "frequency_sd_t": 1.0}]) == PRIOR


def test_two_findings_do_not_take_the_place_of_one_orbit() -> None:
    found = [{"frequency_t": value, "frequency_sd_t": 1.0} for value in (395.0, 405.0)]
    assert len(PRIOR.with_findings(found).orbits) == 3


def test_what_hardly_differs_is_not_planned_again() -> None:
    near = PRIOR.with_findings([{"frequency_t": 1200.0, "frequency_sd_t": 10.0}])
    far = PRIOR.with_findings([{"frequency_t": 1000.0, "frequency_sd_t": 10.0}])
    assert PRIOR.same_as(PRIOR)
    assert near.same_as(PRIOR)  # 1210 T against 1210 T: the highest that must be resolved
    assert not far.same_as(PRIOR)
