"""Error numbers of SCPI-1999 volume 2 section 21.8, and the queue that holds them (section 21.8.1)."""

from __future__ import annotations

from collections import deque

TEXT = {
    0: "No error",
    -101: "Invalid character",
    -102: "Syntax error",
    -103: "Invalid separator",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -111: "Header separator error",
    -112: "Program mnemonic too long",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -121: "Invalid character in number",
    -123: "Exponent too large",
    -124: "Too many digits",
    -128: "Numeric data not allowed",
    -131: "Invalid suffix",
    -138: "Suffix not allowed",
    -141: "Invalid character data",
    -144: "Character data too long",
    -148: "Character data not allowed",
    -151: "Invalid string data",
    -158: "String data not allowed",
    -161: "Invalid block data",
    -168: "Block data not allowed",
    -171: "Invalid expression",
    -178: "Expression data not allowed",
    -200: "Execution error",
    -203: "Command protected",
    -213: "Init ignored",
    -221: "Settings conflict",
    -222: "Data out of range",
    -223: "Too much data",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -240: "Hardware error",
    -310: "System error",
    -350: "Queue overflow",
    -363: "Input buffer overrun",
    -410: "Query INTERRUPTED",
    -420: "Query UNTERMINATED",
    -440: "Query UNTERMINATED after indefinite response",
}


class ScpiError(Exception):
    """An error that goes into the instrument's queue; `detail` is the device-dependent part after the semicolon."""

    def __init__(self, number: int, detail: str = "") -> None:
        self.number = number
        self.detail = detail
        super().__init__(describe(number, detail))


def describe(number: int, detail: str = "") -> str:
    """Return the queue's answer for an error: number, then the quoted text of at most 255 characters."""
    text = TEXT.get(number, "Device-specific error")
    if detail:
        text = f"{text};{detail}"
    return f'{number},"{text[:255].replace(chr(34), chr(39))}"'


def event_bit(number: int) -> int:
    """Return the standard event status bit of an error's class (IEEE 488.2 11.5.1)."""
    if number > 0 or -399 <= number <= -300:
        return 0x08
    return {1: 0x20, 2: 0x10, 4: 0x04}.get(-number // 100, 0)


class ErrorQueue:
    """First in, first out; when it is full the newest entry becomes -350 and further errors are lost."""

    DEPTH = 30

    def __init__(self) -> None:
        self._entries: deque[str] = deque()

    def __len__(self) -> int:
        return len(self._entries)

    def push(self, number: int, detail: str = "") -> None:
        """Add an error."""
        if len(self._entries) < self.DEPTH:
            self._entries.append(describe(number, detail))
        else:
            self._entries[-1] = describe(-350)

    def pop(self) -> str:
        """Remove and return the oldest error, or 0,"No error"."""
        return self._entries.popleft() if self._entries else describe(0)

    def clear(self) -> None:
        """Forget all."""
        self._entries.clear()
