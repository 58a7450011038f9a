"""The status model: IEEE 488.2 section 11 and SCPI-1999 volume 1 section 9."""

from __future__ import annotations

from .scpi_errors import ErrorQueue, event_bit

OPERATION_COMPLETE = 0x01
POWER_ON = 0x80

ERROR_AVAILABLE = 0x04
QUESTIONABLE = 0x08
MESSAGE_AVAILABLE = 0x10
EVENT_SUMMARY = 0x20
MASTER_SUMMARY = 0x40
OPERATION = 0x80


class RegisterGroup:
    """Condition, event and enable register of STATus:OPERation or STATus:QUEStionable; positive transitions only."""

    def __init__(self) -> None:
        self.condition = 0
        self.event = 0
        self.enable = 0

    def put(self, bit: int, on: bool) -> None:
        """Set or clear one condition bit; its rise is an event."""
        mask = 1 << bit
        if on and not self.condition & mask:
            self.event |= mask
        self.condition = self.condition | mask if on else self.condition & ~mask

    def take_event(self) -> int:
        """Return the event register and clear it."""
        event, self.event = self.event, 0
        return event

    @property
    def summary(self) -> bool:
        """Whether an enabled event stands."""
        return bool(self.event & self.enable)


class Status:
    """All registers of one instrument, and its error queue."""

    def __init__(self) -> None:
        self.errors = ErrorQueue()
        self.events = POWER_ON
        self.event_enable = 0
        self.service_enable = 0
        self.operation = RegisterGroup()
        self.questionable = RegisterGroup()

    def error(self, number: int, detail: str = "") -> None:
        """Queue an error and set the event bit of its class."""
        self.errors.push(number, detail)
        self.events |= event_bit(number)

    def take_events(self) -> int:
        """Return the standard event status register and clear it (*ESR?)."""
        events, self.events = self.events, 0
        return events

    def clear(self) -> None:
        """*CLS: all event registers and the error queue; no enables, no conditions."""
        self.errors.clear()
        self.events = 0
        self.operation.event = self.questionable.event = 0

    def preset(self) -> None:
        """STATus:PRESet: the enables of the SCPI registers."""
        self.operation.enable = self.questionable.enable = 0

    def byte(self, *, message_available: bool) -> int:
        """Return the status byte with the master summary in bit 6."""
        byte = ERROR_AVAILABLE if self.errors else 0
        byte |= MESSAGE_AVAILABLE if message_available else 0
        byte |= EVENT_SUMMARY if self.events & self.event_enable else 0
        byte |= QUESTIONABLE if self.questionable.summary else 0
        byte |= OPERATION if self.operation.summary else 0
        return byte | (MASTER_SUMMARY if byte & self.service_enable else 0)
