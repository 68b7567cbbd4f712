"""Status reporting of IEEE 488.2 and SCPI-1999: registers, event groups, and the error queue.

Bits and error numbers: see standards cited in simulators/README.md.
"""

from collections import deque
from collections.abc import Callable
from enum import IntFlag

QUEUE_LENGTH = 16

ERROR_TEXTS = {
    0: "No error",
    -100: "Command error",
    -101: "Invalid character",
    -102: "Syntax error",
    -103: "Invalid separator",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -110: "Command header error",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -120: "Numeric data error",
    -121: "Invalid character in number",
    -123: "Exponent too large",
    -124: "Too many digits",
    -128: "Numeric data not allowed",
    -130: "Suffix error",
    -131: "Invalid suffix",
    -138: "Suffix not allowed",
    -141: "Invalid character data",
    -148: "Character data not allowed",
    -151: "Invalid string data",
    -158: "String data not allowed",
    -161: "Invalid block data",
    -168: "Block data not allowed",
    -200: "Execution error",
    -203: "Command protected",
    -220: "Parameter error",
    -221: "Settings conflict",
    -222: "Data out of range",
    -223: "Too much data",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -240: "Hardware error",
    -241: "Hardware missing",
    -310: "System error",
    -330: "Self-test failed",
    -350: "Queue overflow",
    -360: "Communication error",
    -363: "Input buffer overrun",
    -400: "Query error",
    -410: "Query INTERRUPTED",
    -420: "Query UNTERMINATED",
    -430: "Query DEADLOCKED",
    -440: "Query UNTERMINATED after indefinite response",
}


class EventStatus(IntFlag):
    """Standard event status register."""

    OPERATION_COMPLETE = 1
    QUERY_ERROR = 4
    DEVICE_ERROR = 8
    EXECUTION_ERROR = 16
    COMMAND_ERROR = 32
    USER_REQUEST = 64
    POWER_ON = 128


class StatusByte(IntFlag):
    """Status byte."""

    ERROR_QUEUE = 4
    QUESTIONABLE = 8
    MESSAGE_AVAILABLE = 16
    EVENT_SUMMARY = 32
    MASTER_SUMMARY = 64
    OPERATION = 128


class Refused(Exception):
    """An order that the instrument does not carry out.

    Attributes
    ----------
    code : int
        SCPI-1999 error number.
    detail : str
        Device-dependent information, shown after the standard text.
    """

    def __init__(self, code: int, detail: str = "") -> None:
        super().__init__(code, detail)
        self.code = code
        self.detail = detail


class ErrorQueue:
    """First in, first out; on overflow the newest entry becomes -350."""

    def __init__(self) -> None:
        self._entries: deque[tuple[int, str]] = deque()

    def __len__(self) -> int:
        return len(self._entries)

    def push(self, code: int, detail: str = "") -> None:
        """Add an error."""
        if len(self._entries) >= QUEUE_LENGTH:
            self._entries[-1] = (-350, "")
        else:
            self._entries.append((code, detail))

    def pop(self) -> str:
        """Oldest error as ``number,"text"``; ``0,"No error"`` when there is none."""
        code, detail = self._entries.popleft() if self._entries else (0, "")
        text = ERROR_TEXTS[code] + (f";{detail}" if detail else "")
        return f'{code},"{text[:255]}"'

    def clear(self) -> None:
        """Forget all."""
        self._entries.clear()


class EventGroup:
    """Condition, transition filters, event and enable registers of OPERation or QUEStionable.

    Parameters
    ----------
    condition : callable
        Gives the present condition bits, 15 of them.
    """

    def __init__(self, condition: Callable[[], int]) -> None:
        self._condition = condition
        self._last = 0
        self._event = 0
        self.enable = 0
        self.positive = 0x7FFF
        self.negative = 0

    def observe(self) -> int:
        """Look at the condition, and latch its transitions."""
        now = self._condition() & 0x7FFF
        rose, fell = now & ~self._last, self._last & ~now
        self._event |= (rose & self.positive) | (fell & self.negative)
        self._last = now
        return now

    def take_event(self) -> int:
        """Event register; reading clears it."""
        self.observe()
        event, self._event = self._event, 0
        return event

    def clear(self) -> None:
        """Clear the event register; conditions and filters stay."""
        self.observe()
        self._event = 0

    def preset(self) -> None:
        """STATus:PRESet: nothing enabled, rising edges only."""
        self.enable, self.positive, self.negative = 0, 0x7FFF, 0

    @property
    def summary(self) -> bool:
        """Whether an enabled event is set."""
        self.observe()
        return bool(self._event & self.enable)


class StatusModel:
    """All of an instrument's status.

    Parameters
    ----------
    operation, questionable : callable
        Condition bits of the two registers.
    pending : callable
        Whether an overlapped operation is under way, such as a ramp.
    """

    def __init__(
        self,
        operation: Callable[[], int],
        questionable: Callable[[], int],
        pending: Callable[[], bool] = lambda: False,
    ) -> None:
        self.errors = ErrorQueue()
        self.operation = EventGroup(operation)
        self.questionable = EventGroup(questionable)
        self.event = int(EventStatus.POWER_ON)
        self.event_enable = 0
        self.service_enable = 0
        self.message_available = False
        self._pending = pending
        self._completion_asked = False
        self._polled = 0

    def note(self, code: int, detail: str = "") -> None:
        """Enter an error in queue and event register."""
        self.errors.push(code, detail)
        hundreds = -code // 100
        self.event |= {
            1: EventStatus.COMMAND_ERROR,
            2: EventStatus.EXECUTION_ERROR,
            4: EventStatus.QUERY_ERROR,
        }.get(hundreds, EventStatus.DEVICE_ERROR)

    def take_event(self) -> int:
        """*ESR?: read and clear."""
        self._see_completion()
        event, self.event = self.event, 0
        return event

    def observe(self) -> None:
        """Latch the transitions of both condition registers; done after every order."""
        self.operation.observe()
        self.questionable.observe()
        self._see_completion()

    def complete(self) -> None:
        """*OPC: set the bit as soon as nothing is pending."""
        self._completion_asked = True
        self._see_completion()

    def _see_completion(self) -> None:
        if self._completion_asked and not self._pending():
            self._completion_asked = False
            self.event |= EventStatus.OPERATION_COMPLETE

    def forget_completion(self) -> None:
        """*RST and *CLS: an *OPC that still waits is given up."""
        self._completion_asked = False

    def user_request(self) -> None:
        """Somebody has pressed a key at the instrument."""
        self.event |= EventStatus.USER_REQUEST

    def byte(self) -> int:
        """*STB?: with the master summary in bit 6."""
        self._see_completion()
        value = 0
        if self.errors:
            value |= StatusByte.ERROR_QUEUE
        if self.questionable.summary:
            value |= StatusByte.QUESTIONABLE
        if self.message_available:
            value |= StatusByte.MESSAGE_AVAILABLE
        if self.event & self.event_enable:
            value |= StatusByte.EVENT_SUMMARY
        if self.operation.summary:
            value |= StatusByte.OPERATION
        if value & self.service_enable:
            value |= StatusByte.MASTER_SUMMARY
        return int(value)

    def serial_poll(self, message_available: bool) -> int:
        """Status byte as a serial poll gives it: bit 6 asks for service, once for each reason.

        A reason that has come since the last poll sets it; the poll clears it.
        """
        value = self.byte() & ~StatusByte.MASTER_SUMMARY
        if message_available:
            value |= StatusByte.MESSAGE_AVAILABLE
        reasons = value & self.service_enable
        request = StatusByte.MASTER_SUMMARY if reasons & ~self._polled else 0
        self._polled = reasons
        return int(value | request)

    def clear(self) -> None:
        """*CLS: event registers and error queue."""
        self.forget_completion()
        self.event = 0
        self.errors.clear()
        self.operation.clear()
        self.questionable.clear()
