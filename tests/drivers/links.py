"""What the tests of links share."""

import asyncio
from collections.abc import Callable, Coroutine
from typing import Any

import pytest

from drivers.link import Link, open_link
from drivers.opening import visa_manager
from tests.drivers.fake_instrument import Answer, FakeInstrument, plain

modes = pytest.mark.parametrize("inline", [True, False], ids=["inline", "thread"])


def run(body: Callable[[], Coroutine[Any, Any, None]]) -> None:
    asyncio.run(asyncio.wait_for(body(), 15))


async def opened(fake: FakeInstrument, inline: bool, **changes: Any) -> Link:
    settings: dict[str, Any] = {"timeout_s": 0.1, "retries": 2, "retry_pause_s": 0.0, **changes}
    return await open_link(visa_manager(), fake.address, name="fake", inline=inline, **settings)


def once(trigger: str, answer: Answer) -> Callable[[str], Answer]:
    """Misbehave at the first message of this text only."""
    left = [1]

    def behaviour(message: str) -> Answer:
        if message == trigger and left:
            left.pop()
            return answer
        return plain(message)

    return behaviour
