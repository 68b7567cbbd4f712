"""The shipped rig and sequences, as the tests of planning use them."""

from pathlib import Path

from orchestrator.config.rig import load_rig
from orchestrator.config.sequence import Sequence, load_sequence

_SEQUENCES = Path(__file__).parents[2] / "sequences"

RIG, DOCUMENT = load_rig(_SEQUENCES / "rigs" / "demonstration.toml")


def sequence(name: str) -> Sequence:
    """A shipped sequence by its file's name."""
    return load_sequence(_SEQUENCES / name, RIG, DOCUMENT)[0]
