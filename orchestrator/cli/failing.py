"""How a command fails: one message, and an exit code that a script can use."""

from collections.abc import Iterator
from contextlib import contextmanager

NOT_TAKEN_UP = 1
BAD_INPUT = 2
NIGHT_ENDED_EARLY = 3
INTERRUPTED = 130  # as a shell has it for a process that Ctrl-C ended


class Failed(Exception):
    """A command cannot go on. ``code`` is its exit code."""

    def __init__(self, text: str, code: int = BAD_INPUT) -> None:
        self.code = code
        super().__init__(text)


@contextmanager
def input_errors() -> Iterator[None]:
    """Turn errors in what a person gave into one message and exit code 2."""
    from drivers.dialect import DialectError
    from drivers.link import LinkError
    from orchestrator.analysis.sweeps import AnalysisError
    from orchestrator.config.document import ConfigError
    from orchestrator.ledger.schema import LedgerError
    from orchestrator.planning.staircase import PlanError
    from orchestrator.stream.address import AddressError

    try:
        yield
    except (
        AddressError,
        AnalysisError,
        ConfigError,
        DialectError,
        LedgerError,
        LinkError,
        PlanError,
    ) as error:
        raise Failed(str(error)) from error
