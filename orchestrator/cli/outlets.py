"""Where a night's messages go: an analyst inside (full speed), or the broker (live and paced)."""

import time
from typing import Any

from orchestrator.analysis.analyst import Analyst
from orchestrator.ledger.reading import NightReader
from orchestrator.ledger.writing import Ledger
from orchestrator.readings import Channel, Reading
from orchestrator.stream.address import BrokerAddress
from orchestrator.stream.local import LocalStream
from orchestrator.stream.messages import (
    EventMessage,
    FindingMessage,
    Message,
    NightState,
    ReadingBatch,
)
from orchestrator.stream.publisher import Publisher

_BATCH = 200


class InsideOutlet:
    """The analyst in the night's own process, through the same messages, so that a rehearsal at
    full speed is repeatable."""

    def __init__(self, rig: str, night: str, channels: tuple[Channel, ...], ledger: Ledger) -> None:
        self._rig, self._night, self._channels = rig, night, channels
        self._ledger = ledger
        self._stream = LocalStream()
        self._analyst = Analyst()
        self._waiting: list[Reading] = []
        self._found: list[FindingMessage] = []
        self._events = 0
        self._stream.subscribe(self._hear)

    def _hear(self, message: Message) -> None:
        if isinstance(message, FindingMessage):
            self._found.append(message)
            return
        for data in self._analyst.take(message):
            finding = FindingMessage(
                night=self._night,
                rig=self._rig,
                seq=len(self._found) + 1,
                source="analyst",
                data=data,
            )
            self._stream.publish(finding)

    def reading(self, reading: Reading) -> None:
        self._waiting.append(reading)
        if len(self._waiting) >= _BATCH:
            self._flush()

    def _flush(self) -> None:
        if self._waiting:
            self._stream.publish(
                ReadingBatch.of(self._waiting, self._channels, night=self._night, rig=self._rig)
            )
            self._waiting = []

    def event(self, kind: str, name: str, data: dict[str, Any]) -> None:
        self._flush()
        self._events += 1
        self._stream.publish(
            EventMessage(
                night=self._night,
                rig=self._rig,
                seq=self._events,
                time_s=0.0,
                unix_s=0.0,
                event_kind=kind,
                name=name,
                severity="info",
                text="",
                data=data,
            )
        )

    def state(self, state: NightState) -> None:
        """Nobody watches a rehearsal at full speed over the stream."""

    def findings(self) -> list[FindingMessage]:
        found, self._found = self._found, []
        return found

    def close(self) -> None:
        """Nothing is open."""


class BrokerOutlet:
    """The ledger's tail goes to the broker by a publisher; findings come back the same way."""

    def __init__(
        self, address: BrokerAddress, rig: str, night: str, ledger: Ledger, linger_s: float = 3.0
    ) -> None:
        folder = ledger.path
        self._linger_s = linger_s
        self.publisher = Publisher(
            address, rig=rig, night=night, open_source=lambda: NightReader(folder)
        )
        self.publisher.start()

    def reading(self, reading: Reading) -> None:
        """The publisher reads the ledger itself."""

    def event(self, kind: str, name: str, data: dict[str, Any]) -> None:
        """The publisher reads the ledger itself."""

    def state(self, state: NightState) -> None:
        self.publisher.update(state)

    def findings(self) -> list[FindingMessage]:
        return self.publisher.take_findings()

    def close(self) -> None:
        """Give the publisher a moment of wall time to send the night's end, then stop it."""
        if self.publisher.connected:
            time.sleep(self._linger_s)
        self.publisher.stop()
