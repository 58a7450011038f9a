"""Touchstone files of one-port data, written through scikit-rf, their names and the comments at their head."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from benchrun.derive.results import OnePortData
from benchrun.errors import DataSetError
from benchrun.save.files import safe_name, write_whole

FOLDER = "touchstone"
ENCODING = "iso-8859-1"


def drive_text(drive_dbm: float) -> str:
    """Return a drive as it stands in file names, so that they sort by drive within a sign.

    >>> drive_text(14.0), drive_text(-3.0)
    ('p14.0dBm', 'm03.0dBm')
    """
    decimals = 1 if abs(round(drive_dbm, 1) - drive_dbm) < 5e-4 else 3
    return f"{'m' if drive_dbm < 0 else 'p'}{abs(drive_dbm):0{decimals + 3}.{decimals}f}dBm"


def file_name(data: OnePortData) -> str:
    """Return {serial}_{drive}_{quantity}.s1p, one part for every condition; letters, digits and .-_ only."""
    parts = [data.serial or "unnamed"]
    for key, value in data.conditions.items():
        parts.append(drive_text(float(value)) if key == "drive_dbm" else _condition_text(key, value))
    return "_".join(safe_name(part) for part in (*parts, data.quantity)) + ".s1p"


def touchstone_text(data: OnePortData) -> str:
    """Return the text of the file: comments, then frequency in Hz, real and imaginary part to the last digit.

    Raises DataSetError where a value is no number or the frequencies do not rise: no such file is ever written.
    """
    import skrf

    if not np.all(np.isfinite(data.values)) or np.any(np.diff(data.frequency_hz) <= 0.0):
        raise DataSetError(f"{file_name(data)}: values must be numbers on rising frequencies; nothing was written.")
    network = skrf.Network(f=data.frequency_hz, s=data.values, z0=data.reference_ohm, f_unit="Hz")
    network.comments = "\n".join(_one_line(line) for line in data.comments)
    return str(network.write_touchstone(filename="network", return_string=True, form="ri"))


def write_touchstone(folder: Path, data: OnePortData) -> Path:
    """Write `data` below folder/touchstone and return the file's path. Raises DiskError, FolderError, DataSetError."""
    path = folder / FOLDER / file_name(data)
    write_whole(path, touchstone_text(data), ENCODING)
    return path


def _condition_text(key: str, value: float | str) -> str:
    """Return a condition as a part of a file name: 'drain.voltage_v' and 28.0 become 'drain.voltage-28-v'."""
    name, _, unit = key.rpartition("_")
    text = f"{value:g}" if isinstance(value, float | int) else str(value)
    return f"{name or key}-{text.replace('-', 'm') if name else text}{'-' + unit if name else ''}"


def _one_line(text: str) -> str:
    """Return `text` as one comment line that the file's encoding can carry."""
    return " ".join(text.split()).encode(ENCODING, "replace").decode(ENCODING)
