"""VISA addresses, judged without opening anything."""

from __future__ import annotations

from pyvisa import rname

EXAMPLE = "TCPIP0::192.0.2.21::hislip0::INSTR"


def address_fault(address: str) -> str:
    """Return what is wrong with a text that is not a VISA resource string, "" where it is one."""
    try:
        rname.ResourceName.from_string(address)
    except ValueError:
        return f"'{address}' is not a VISA address; it is written like {EXAMPLE}."
    return ""
