"""The independent checker finds a command that would be unsafe as the last one."""

from pathlib import Path

import pytest

from orchestrator.ledger.records import CommandRecord, EventRecord
from orchestrator.readings import Reading
from orchestrator.report.checker import Limits, check_commands

TEXT = (Path(__file__).parents[2] / "sequences" / "rigs" / "demonstration.toml").read_text(
    encoding="utf-8"
)
LIMITS = Limits.of(TEXT)
PER_MIN = 1 / 60


def readings(*fields_t: float) -> list[Reading]:
    return [
        Reading(number, float(number), 0.0, "", {"field_t": field_t}, {"magnet": float(number)})
        for number, field_t in enumerate(fields_t, 1)
    ]


def commands(*given: tuple[int, str, float]) -> list[CommandRecord]:
    return [
        CommandRecord(
            number, reading + 0.5, "magnet", operation, value, "", value, "accepted", "", reading
        )
        for number, (reading, operation, value) in enumerate(given, 1)
    ]


def test_the_limits_are_those_of_the_rig_file() -> None:
    assert LIMITS.rate_allowed(0, 6) == pytest.approx(0.6 * PER_MIN)
    assert LIMITS.rate_allowed(0, 6.001) == pytest.approx(0.3 * PER_MIN)
    assert LIMITS.rate_allowed(-6, 3) == pytest.approx(0.6 * PER_MIN)
    assert LIMITS.rate_allowed(-12, -9.5) == pytest.approx(0.12 * PER_MIN)
    assert LIMITS.rate_allowed(9.5, 12.5) == 0


def test_a_staircase_in_its_safe_order_has_no_violation() -> None:
    safe = commands(
        (1, "rate", 0.6 * PER_MIN),
        (1, "target", 6.0),
        (1, "ramping", 1),
        (2, "rate", 0.3 * PER_MIN),
        (2, "target", 9.0),
    )
    assert check_commands(safe, readings(0.0, 5.9, 5.95), [], LIMITS) == []


@pytest.mark.parametrize(
    "unsafe",
    [
        # The target first: left alone, the supply would enter the slower zone too fast.
        [(2, "target", 9.0), (2, "rate", 0.3 * PER_MIN)],
        # The faster rate before the slower zone has been left.
        [(2, "rate", 0.61 * PER_MIN)],
        [(2, "target", 12.5)],
    ],
)
def test_an_unsafe_order_is_found(unsafe: list[tuple[int, str, float]]) -> None:
    begin = [(1, "rate", 0.6 * PER_MIN), (1, "target", 6.0), (1, "ramping", 1.0)]
    found = check_commands(commands(*begin, *unsafe), readings(0.0, 5.9, 5.95), [], LIMITS)
    assert found
    assert "command 4" in found[0]


def test_a_held_supply_may_be_told_anything_within_its_range() -> None:
    held = commands((1, "target", 11.0), (1, "rate", 0.6 * PER_MIN))
    assert check_commands(held, readings(0.0), [], LIMITS) == []
    assert check_commands([*held, *commands((1, "ramping", 1))], readings(0.0), [], LIMITS)


def test_a_ramp_command_after_a_quench_is_a_violation() -> None:
    trip = EventRecord(1, 1.2, 0.0, "trip", "quench-flag", "discharge", "")
    found = check_commands(commands((1, "ramping", 0)), readings(5.0), [trip], LIMITS)
    assert "after a quench" in found[0]


def test_a_refused_command_never_reached_the_supply() -> None:
    refused = [CommandRecord(1, 1.5, "magnet", "target", 20.0, "", float("nan"), "refused", "", 1)]
    assert check_commands(refused, readings(5.0), [], LIMITS) == []


def test_a_failed_command_may_have_reached_the_supply() -> None:
    failed = [CommandRecord(1, 1.5, "magnet", "target", 20.0, "", float("nan"), "failed", "", 1)]
    assert check_commands(failed, readings(5.0), [], LIMITS)
