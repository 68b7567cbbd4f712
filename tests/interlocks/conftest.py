"""A watched rig whose ledger is a file of its own."""

from collections.abc import Iterator
from pathlib import Path

import pytest

from orchestrator.ledger.writing import Ledger
from tests.interlocks.fakes import CHANNELS, Watched
from tests.ledger.invented import DESCRIPTION


@pytest.fixture
def watched(tmp_path: Path) -> Iterator[Watched]:
    """Gate and sentinel on obedient instruments; the clock stands until it is set."""
    ledger = Ledger.create(
        tmp_path,
        description=DESCRIPTION,
        channels=CHANNELS,
        commit="batched",
        clock=lambda: 0.0,
        wall=lambda: 0.0,
    )
    yield Watched(tmp_path, ledger)
    ledger.close()
