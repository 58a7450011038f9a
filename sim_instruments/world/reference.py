"""The reference world: its constants in one file, and the hash that every figure quotes."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from importlib.resources import files
from typing import Any

_WORLDS = {"R1": "r1.json"}


def _file_bytes(name: str) -> bytes:
    if name not in _WORLDS:
        raise ValueError(f"unknown reference world {name!r}; there is: {', '.join(sorted(_WORLDS))}")
    # Line endings belong to the machine, not to the world: one hash everywhere.
    return files(__package__).joinpath(_WORLDS[name]).read_bytes().replace(b"\r\n", b"\n")


def reference_world(name: str = "R1") -> dict[str, Any]:
    """Constants of a reference world (SI units; levels in dBm, ratios in dB). Raises ValueError for an unknown name."""
    constants: dict[str, Any] = json.loads(_file_bytes(name))
    return constants


def reference_sha256(name: str = "R1") -> str:
    """Return the SHA-256 of the file with the constants, in hexadecimal."""
    return hashlib.sha256(_file_bytes(name)).hexdigest()


def overlaid(constants: Mapping[str, Any], changes: Mapping[str, Any]) -> dict[str, Any]:
    """Return a copy with some numbers replaced, at any depth. Raises ValueError for a name that is not there."""
    unknown = sorted(set(changes) - set(constants))
    if unknown:
        raise ValueError(f"the reference world has no {', '.join(unknown)}; it has: {', '.join(sorted(constants))}")
    result = dict(constants)
    for name, value in changes.items():
        result[name] = overlaid(constants[name], value) if isinstance(value, Mapping) else value
    return result
