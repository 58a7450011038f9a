"""What every instrument has: IEEE 488.2 section 10 and SCPI-1999 volume 1 section 4.2.1."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

from .scpi_command import Command
from .scpi_status import RegisterGroup
from .scpi_values import Boolean, Number

if TYPE_CHECKING:
    from .scpi_instrument import Instrument


def _clear(instrument: Instrument) -> None:
    instrument.status.clear()
    instrument.forget_completion()


def _wait_and_say_one(instrument: Instrument) -> str:
    instrument.wait()
    return "1"


def _lock_panel(instrument: Instrument, value: bool) -> None:
    instrument.panel_locked = value


def _put_register(name: str) -> Callable[[Instrument, float], None]:
    def act(instrument: Instrument, value: float) -> None:
        setattr(instrument.status, name, int(value))

    return act


def _put_service_enable(instrument: Instrument, value: float) -> None:
    instrument.status.service_enable = int(value) & ~0x40  # bit 6 is ignored (IEEE 488.2 11.3.2.3)


def _register_group(header: str, group: Callable[[Instrument], RegisterGroup]) -> tuple[Command, ...]:
    def enable(instrument: Instrument, value: float) -> None:
        group(instrument).enable = int(value)

    return (
        Command(f"{header}[:EVENt]", ask=lambda i: str(group(i).take_event())),
        Command(f"{header}:CONDition", ask=lambda i: str(group(i).condition)),
        Command(f"{header}:ENABle", enable, lambda i: str(group(i).enable), (_MASK16,)),
    )


_MASK8 = Number("", 0, 255, 0, integer=True)
_MASK16 = Number("", 0, 32767, 0, integer=True)

COMMON: tuple[Command, ...] = (
    Command("*CLS", _clear),
    Command("*ESE", _put_register("event_enable"), lambda i: str(i.status.event_enable), (_MASK8,)),
    Command("*ESR", ask=lambda i: str(i.status.take_events())),
    Command("*IDN", ask=lambda i: i.identity, indefinite=True),
    Command("*OPC", lambda i: i.want_completion(), _wait_and_say_one),
    Command("*OPT", ask=lambda i: i.options, indefinite=True),
    Command("*RST", lambda i: i.reset()),
    Command("*SRE", _put_service_enable, lambda i: str(i.status.service_enable), (_MASK8,)),
    Command("*STB", ask=lambda i: str(i.status.byte(message_available=False))),
    Command("*TST", ask=lambda _: "0"),
    Command("*WAI", lambda i: i.wait()),
    Command("SYSTem:ERRor[:NEXT]", ask=lambda i: i.status.errors.pop()),
    Command("SYSTem:ERRor:COUNt", ask=lambda i: str(len(i.status.errors))),
    Command("SYSTem:VERSion", ask=lambda _: "1999.0"),
    Command("SYSTem:KLOCk", _lock_panel, lambda i: Boolean().show(i.panel_locked), (Boolean(),)),
    Command("STATus:PRESet", lambda i: i.status.preset()),
    *_register_group("STATus:OPERation", lambda i: i.status.operation),
    *_register_group("STATus:QUEStionable", lambda i: i.status.questionable),
)
