"""What the ledger keeps besides readings, as typed rows."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

Mode = Literal["rehearsal", "live"]
Verdict = Literal["accepted", "refused", "mismatch", "failed"]
RequestKind = Literal["hold", "park", "acknowledge"]

MODES: tuple[Mode, ...] = ("rehearsal", "live")
VERDICTS: tuple[Verdict, ...] = ("accepted", "refused", "mismatch", "failed")
REQUEST_KINDS: tuple[RequestKind, ...] = ("hold", "park", "acknowledge")


@dataclass(frozen=True, slots=True)
class NightDescription:
    """What a night is, written once when its ledger is made.

    Attributes
    ----------
    night : str
        Identity of the night, also the name of its folder.
    rig, sequence : str
        Names given in the rig and the sequence file.
    mode : {"rehearsal", "live"}
        Whether the instruments were simulated.
    started_unix_s : float
        Wall time of the start, seconds since 1970.
    program_version : str
        Version of nightfield that made the ledger.
    seed : int or None
        Seed of a rehearsal, from -2**63 to 2**63 - 1; None in a live night.
    broker : str or None
        ``host:port`` of the stream's broker; None without a stream. Never a password.
    rig_text, sequence_text, world_text : str
        The files as given; ``world_text`` is empty in a live night.
    truth : Mapping[str, Any] or None
        What the simulated sample really is, in a rehearsal; kept as JSON.
    """

    night: str
    rig: str
    sequence: str
    mode: Mode
    started_unix_s: float
    program_version: str
    seed: int | None = None
    broker: str | None = None
    rig_text: str = ""
    sequence_text: str = ""
    world_text: str = ""
    truth: Mapping[str, Any] | None = None


@dataclass(frozen=True, slots=True)
class CommandRecord:
    """One command at the gate, whether it went out or not.

    ``value`` and ``read_back`` are in the SI unit of the operation, flags as 0 or 1, NaN where
    there is none. ``reading_number`` is the last reading appended before the command.
    """

    id: int
    time_s: float
    instrument: str
    operation: str
    value: float
    sent: str
    read_back: float
    verdict: Verdict
    reason: str
    reading_number: int


@dataclass(frozen=True, slots=True)
class EventRecord:
    """One event: a step's start or end, a trip, an acknowledgement, a request taken up."""

    id: int
    time_s: float
    unix_s: float
    kind: str
    name: str
    severity: str
    text: str
    data: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class FindingRecord:
    """One message of the analyst as it was taken up; ``source`` says who sent it."""

    id: int
    time_s: float
    source: str
    data: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class CheckpointRecord:
    """What the engine needs to take a night up again."""

    id: int
    time_s: float
    data: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class RequestRecord:
    """A person's wish; ``taken_s`` is None until the engine has taken it up."""

    id: int
    unix_s: float
    kind: RequestKind
    name: str
    reason: str
    person: str
    taken_s: float | None
