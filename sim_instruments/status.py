"""What an instrument remembers of its troubles: error queue, event status, status byte.

PURE. IEEE 488.2 §11 and SCPI-1999 vol. 1 §9 and vol. 2 §21.8; only the errors an analyser can report are listed.
"""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass, field

QUEUE_LENGTH = 20

# Event status register
OPERATION_COMPLETE = 1
QUERY_ERROR = 4
DEVICE_ERROR = 8
EXECUTION_ERROR = 16
COMMAND_ERROR = 32
POWER_ON = 128

# Status byte
ERROR_QUEUE = 4
MESSAGE_AVAILABLE = 16
EVENT_SUMMARY = 32
MASTER_SUMMARY = 64

ERRORS = {
    0: "No error",
    -100: "Command error",
    -101: "Invalid character",
    -102: "Syntax error",
    -103: "Invalid separator",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -110: "Command header error",
    -111: "Header separator error",
    -112: "Program mnemonic too long",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -121: "Invalid character in number",
    -123: "Exponent too large",
    -131: "Invalid suffix",
    -138: "Suffix not allowed",
    -151: "Invalid string data",
    -158: "String data not allowed",
    -168: "Block data not allowed",
    -211: "Trigger ignored",
    -222: "Data out of range",
    -223: "Too much data",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -240: "Hardware error",
    -350: "Queue overflow",
    -363: "Input buffer overrun",
    -410: "Query INTERRUPTED",
    -420: "Query UNTERMINATED",
}

_EVENT_OF_CLASS = {1: COMMAND_ERROR, 2: EXECUTION_ERROR, 3: DEVICE_ERROR, 4: QUERY_ERROR}


@dataclass(slots=True)
class Status:
    """Error queue, event register with its enable, service request enable."""

    events: int = POWER_ON
    event_enable: int = 0
    service_enable: int = 0
    queue: deque[int] = field(default_factory=deque)

    def report(self, code: int) -> None:
        """Queue an error and set its event bit; a full queue's last entry becomes −350 (SCPI-1999 vol. 2 §21.8.1)."""
        self.events |= _EVENT_OF_CLASS[-code // 100]
        if len(self.queue) < QUEUE_LENGTH:
            self.queue.append(code)
        else:
            self.queue[-1] = -350
            self.events |= DEVICE_ERROR

    def next_error(self) -> str:
        code = self.queue.popleft() if self.queue else 0
        return f'{code},"{ERRORS[code]}"'

    def take_events(self) -> int:
        """Read the event register, which clears it."""
        events, self.events = self.events, 0
        return events

    def clear(self) -> None:
        """``*CLS``: queue and events, not the enables."""
        self.queue.clear()
        self.events = 0

    def byte(self, message_available: bool = False) -> int:
        """The status byte with the master summary in bit 6 (IEEE 488.2 §11.2)."""
        bits = ERROR_QUEUE if self.queue else 0
        bits |= MESSAGE_AVAILABLE if message_available else 0
        bits |= EVENT_SUMMARY if self.events & self.event_enable else 0
        return bits | (MASTER_SUMMARY if bits & self.service_enable else 0)
