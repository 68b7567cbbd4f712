"""Order, gaps and asking, without any broker."""

from hypothesis import given
from hypothesis import strategies as st

from orchestrator.stream.gaps import Asking, InOrder, Replay


@given(st.permutations(range(1, 30)), st.lists(st.integers(1, 29)))
def test_items_come_out_once_and_in_order_however_they_arrive(
    arrival: list[int], again: list[int]
) -> None:
    """Any order, any duplicates."""
    order = InOrder[int](1)
    out = [item for number in [*arrival, *again] for item in order.accept([(number, number)])]
    assert out == list(range(1, 30))
    assert order.duplicates == len(again)
    assert order.missing() is None


def test_gap_is_named_from_first_missing_to_last_missing() -> None:
    """Between what was had and what is ahead, or up to what is said to exist."""
    order = InOrder[str](None)
    assert order.accept([(5, "e")]) == ["e"]
    assert order.missing() is None
    assert order.accept([(9, "i"), (12, "l")]) == []
    assert order.missing() == (6, 8)
    order.accept((n, "") for n in (6, 7, 8))
    assert order.missing() == (10, 11)
    order.accept((n, "") for n in (10, 11))
    order.know_of(20)
    assert order.missing() == (13, 20)


def test_items_far_ahead_are_let_go_and_counted() -> None:
    """What is kept beyond a gap is bounded; the rest is missing again afterwards."""
    order = InOrder[int](1, most_ahead=2)
    order.accept((n, n) for n in (3, 4, 5))
    assert order.let_go == 1
    assert order.accept((n, n) for n in (1, 2)) == [1, 2, 3, 4]
    assert order.missing() == (5, 5)


def test_asking_repeats_only_after_no_progress() -> None:
    """Once, then silence while the gap shrinks, then again after the patience."""
    asking = Asking(3.0)
    assert asking.due((1, 100), 0.0)
    assert not asking.due((1, 100), 2.9)
    assert not asking.due((50, 100), 4.0)
    assert not asking.due((50, 100), 6.9)
    assert asking.due((50, 100), 7.0)
    assert not asking.due(None, 8.0)
    assert asking.due((150, 160), 8.0)
    assert asking.due((161, 170), 8.1)


def test_replay_goes_on_to_the_end_whoever_asks_for_the_start_again() -> None:
    """A subscriber that asks for all, over and over, holds nobody up."""
    replay = Replay()
    replay.want(1, 100)
    sent = []
    while span := replay.next_range():
        sent.append(span[0])
        if len(sent) < 12:
            replay.want(1, 100)
        replay.sent(min(span[0] + 9, span[1]))
    assert sent == [*range(1, 101, 10), *range(1, 101, 10)]
    replay.want(5, 6)
    replay.want(6, 9)
    assert replay.next_range() == (5, 9)
    replay.nothing_left()
    assert replay.next_range() is None
