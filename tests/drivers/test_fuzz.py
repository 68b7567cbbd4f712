"""Thousands of numbered exchanges with random faults: no reply is taken for another's."""

import asyncio
import random
from collections import Counter

import pytest

from drivers import wire
from drivers.link import LinkError, open_link
from drivers.opening import visa_manager
from tests.drivers.fake_instrument import Answer, FakeInstrument, plain

TIMEOUT_S = 0.012
FAULTS = {
    "late": lambda reply: Answer((reply,), delay_s=TIMEOUT_S * 1.2),
    "much later": lambda reply: Answer(held=reply),
    "lost": lambda reply: Answer(),
    "cut": lambda reply: Answer((reply[:1],)),
    "cut and closed": lambda reply: Answer((reply[:-1],), close=True),
    "garbled": lambda reply: Answer((b"\x80" + reply[1:],)),
    "another shape": lambda reply: Answer((b"?" + reply,)),
    "doubled": lambda reply: Answer((reply + reply,)),
    "in pieces": lambda reply: Answer((reply[:1], reply[1:])),
    "closed before": lambda reply: Answer(close=True),
    "closed after": lambda reply: Answer((reply,), close=True),
    "reset": lambda reply: Answer(reset=True),
}


class Unruly:
    """Answers as `plain` does, and at random as one of the faults, identity included."""

    def __init__(self, seed: int, share: float) -> None:
        self._random = random.Random(seed)
        self.share = share
        self.done: Counter[str] = Counter()

    def __call__(self, message: str) -> Answer:
        healthy = plain(message)
        if not healthy.pieces or self._random.random() >= self.share:
            return healthy
        fault = self._random.choice(sorted(FAULTS))
        self.done[fault] += 1
        return FAULTS[fault](healthy.pieces[0])


@pytest.mark.parametrize(
    ("inline", "pyvisa_py", "count"),
    [(True, True, 1000), (False, True, 1000), (False, False, 60)],
    ids=["inline", "thread", "any library"],
)
def test_no_reply_is_taken_for_that_of_another_query(
    inline: bool, pyvisa_py: bool, count: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    if not pyvisa_py:  # the way of every other VISA library, over pyvisa-py
        monkeypatch.setattr(wire, "_socket_of", lambda resource: None)

    async def body() -> None:
        unruly = Unruly(seed=11 + inline, share=0.05)
        with FakeInstrument(unruly) as fake:
            unruly.share, share = 0.0, unruly.share
            link = await open_link(
                visa_manager(),
                fake.address,
                name="fake",
                inline=inline,
                timeout_s=TIMEOUT_S,
                retries=1,
                retry_pause_s=0.0,
            )
            unruly.share = share
            given_up = 0
            for number in range(count):
                try:
                    reply = await link.ask(f"N{number}?", int)
                except LinkError:
                    given_up += 1
                else:
                    assert reply == number
            assert len(unruly.done) == len(FAULTS) or count < 1000
            assert given_up < count / 10
            assert link.counters.exchanges == count - given_up
            assert link.counters.retries > count / 60
            unruly.share = 0.0
            assert await link.ask("N7?", int) == 7
            await link.close()

    asyncio.run(asyncio.wait_for(body(), 30))


def test_writes_among_faults_arrive_at_most_once() -> None:
    async def body() -> None:
        unruly = Unruly(seed=3, share=0.1)
        with FakeInstrument(unruly) as fake:
            unruly.share, share = 0.0, unruly.share
            link = await open_link(
                visa_manager(),
                fake.address,
                name="fake",
                inline=False,
                timeout_s=TIMEOUT_S,
                retry_pause_s=0.0,
            )
            unruly.share = share
            certain: list[str] = []
            may_have: list[str] = []
            never: list[str] = []
            for number in range(250):
                message = f"SET {number};N{number}?"
                try:
                    await link.ask(message, str, repeat=False)
                except LinkError as error:
                    (may_have if error.sent else never).append(message)
                else:
                    certain.append(message)
            assert all(fake.said(message) == 1 for message in certain)
            assert all(fake.said(message) <= 1 for message in may_have)
            assert all(fake.said(message) == 0 for message in never)
            assert len(may_have) > 10
            await link.close()

    asyncio.run(asyncio.wait_for(body(), 30))


def test_cancelling_at_random_moments_leaves_no_reply_behind() -> None:
    async def body() -> None:
        dice = random.Random(5)

        def slow(message: str) -> Answer:
            healthy = plain(message)
            return Answer(healthy.pieces, delay_s=dice.choice([0.0, 0.0, 0.003]))

        with FakeInstrument(slow) as fake:
            link = await open_link(
                visa_manager(), fake.address, name="fake", inline=False, timeout_s=1.0
            )
            cancelled = 0
            for number in range(200):
                task = asyncio.create_task(link.query(f"N{number}?"))
                if dice.random() < 0.3:
                    await asyncio.sleep(dice.random() * 0.004)
                    task.cancel()
                try:
                    assert await task == str(number)
                except asyncio.CancelledError:
                    cancelled += 1
            assert 15 < cancelled < 150
            assert link.counters.errors == 0
            await link.close()

    asyncio.run(asyncio.wait_for(body(), 30))
