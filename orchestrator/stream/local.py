"""The stream within one process, for rehearsals at full speed: same messages, same bytes."""

from collections.abc import Callable

from orchestrator.stream.messages import Message, decode, encode, topic_of


class LocalStream:
    """Delivers every message at once to every subscriber, through encoding and decoding.

    An error in a subscriber comes back out of `publish`: in a rehearsal it is a fault to be seen.
    """

    def __init__(self) -> None:
        self._subscribers: list[Callable[[Message], None]] = []
        self.sent = 0

    def subscribe(self, subscriber: Callable[[Message], None]) -> None:
        """Call ``subscriber`` with every message published from now on."""
        self._subscribers.append(subscriber)

    def publish(self, message: Message) -> None:
        """Encode, decode and deliver a message; returns when every subscriber has."""
        kind, payload = encode(message)
        arrived = decode(topic_of(message.rig, kind), payload)
        self.sent += 1
        for subscriber in tuple(self._subscribers):
            subscriber(arrived)
