"""What an archive says beside its readings: where the run came from, what happened, what was made of it."""

from __future__ import annotations

import getpass
import platform
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from importlib import metadata
from typing import Any, Literal

State = Literal["running", "complete", "stopped", "failed", "unsafe"]
#: Libraries whose version can matter to what stands in an archive.
LIBRARIES = ("benchrun", "numpy", "apsw", "pyvisa", "pyvisa-py", "scikit-rf")


@dataclass(frozen=True, slots=True)
class Meta:
    """Where a run came from and how it stands.

    `files` holds the texts of the recipe, bench, kit and dialects as run, by file name; `recipe` and `bench` name those
    two in it. `origin` is "real" or "simulated:<seed>". `identities` maps each instrument to maker, model, serial,
    firmware, options and, where it was asked, reference_locked; `cal_due` to its calibration's due date (ISO 8601)
    where that is known. `result` is what became of the run, None while it is running. Times are UTC, ISO 8601.
    """

    run_id: str
    title: str
    recipe: str
    bench: str
    files: Mapping[str, str]
    schedule_hash: str
    readings_planned: int
    origin: str
    seed: int | None = None
    device: Mapping[str, str] = field(default_factory=dict)
    versions: Mapping[str, str] = field(default_factory=dict)
    identities: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    operator: str = ""
    cal_due: Mapping[str, str] = field(default_factory=dict)
    started_utc: str = ""
    ended_utc: str = ""
    state: State = "running"
    result: Mapping[str, Any] | None = None


@dataclass(frozen=True, slots=True)
class Event:
    """Something that happened: its kind ("operator", "procedure", "failure", "safe-state"), a text, and details.

    `detail` is JSON-like; `at_ns` is bench time; `at_utc` is filled in as it is logged where it is empty.
    """

    kind: str
    text: str
    detail: Mapping[str, Any] = field(default_factory=dict)
    at_ns: int = 0
    at_utc: str = ""


@dataclass(frozen=True, slots=True)
class Product:
    """Something made of readings (a calibration, a levelling): its number in this archive, and its document."""

    number: int
    kind: str
    name: str
    document: Mapping[str, Any]
    made_utc: str


def utc_now() -> str:
    """Return the time as ISO 8601 text, UTC, to the millisecond."""
    return datetime.now(UTC).isoformat(timespec="milliseconds")


def operator_name() -> str:
    """Return the login name of whoever runs this, "unknown" where the machine knows none."""
    try:
        return getpass.getuser()
    except (OSError, KeyError, ImportError):
        return "unknown"


def software_versions(plugins: Iterable[tuple[str, str]] = ()) -> dict[str, str]:
    """Return the versions of benchrun, Python, the libraries that matter here, and `plugins` (name, version)."""
    found = {"python": platform.python_version(), "platform": platform.platform()}
    for name in LIBRARIES:
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = "not installed"
    return found | {f"plugin {name}": version for name, version in plugins}
