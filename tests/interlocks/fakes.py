"""Instruments that do as they are told at once, a clock set by hand, and a rig around them."""

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from drivers.capabilities import Written
from orchestrator.bench import Bench, channels_of
from orchestrator.config.rig import load_rig
from orchestrator.interlocks.gate import Gate
from orchestrator.interlocks.sentinel import Sentinel
from orchestrator.ledger.writing import Ledger
from orchestrator.readings import Reading

RIG, DOCUMENT = load_rig(Path(__file__).parents[2] / "sequences" / "rigs" / "demonstration.toml")
CHANNELS = channels_of(RIG)
INSTRUMENTS = ("magnet", "stage", "rxx", "rxy", "helium")


@dataclass
class Obedient:
    """Any instrument: records what is written to it, and reads it back.

    ``says`` holds other read-backs by operation; an exception there is raised.
    """

    name: str
    log: list[tuple[str, str, float]]
    says: dict[str, Any] = field(default_factory=dict)

    def __getattr__(self, operation: str) -> Callable[[Any], Any]:
        if not operation.startswith("write_"):
            raise AttributeError(operation)

        async def write(value: Any) -> Written:
            short = operation.removeprefix("write_")
            self.log.append((self.name, short, float(value)))
            back = self.says.get(short, value)
            if isinstance(back, Exception):
                raise back
            return Written(sent=f"{short} {value}", read_back=back)

        return write


class Watched:
    """Gate and sentinel of the demonstration rig, on obedient instruments."""

    def __init__(self, folder: Path, ledger: Ledger) -> None:
        self.folder = folder
        self.now_s = 0.0
        self.log: list[tuple[str, str, float]] = []
        parts = {name: Obedient(name, self.log) for name in INSTRUMENTS}
        self.parts = parts
        as_any: Any = parts
        bench = Bench(
            as_any["magnet"],
            as_any["stage"],
            {name: as_any[name] for name in ("rxx", "rxy")},
            {"helium": as_any["helium"]},
        )
        self.ledger = ledger
        self.gate = Gate(bench, RIG, DOCUMENT, ledger, lambda: self.now_s)
        self.sentinel = Sentinel(RIG, CHANNELS, self.gate, lambda: self.now_s)
        self.number = 0

    def reading(self, field_t: float = 0.0, **other: float) -> Reading:
        """All instruments, healthy and at rest, but for what is given."""
        self.number += 1
        current = field_t / RIG.magnet.coil_constant_t_per_a
        values = {channel.name: 0.0 for channel in CHANNELS}
        values |= {
            "field_t": field_t,
            "current_a": current,
            "magnet_v": RIG.magnet.lead_resistance_ohm * current,
            "switch_heater": 1.0,
            "sample_k": 1.0,
            "setpoint_k": 1.0,
            "helium_percent": 80.0,
        }
        taken = dict.fromkeys(INSTRUMENTS, self.now_s)
        return Reading(self.number, self.now_s, self.now_s, "test", values | other, taken)

    async def see(self, reading: Reading) -> list[str]:
        """Let the sentinel judge; the names of the new trips."""
        return [one.name for one in await self.sentinel.observe(reading, dict(reading.taken_s))]
