"""Touchstone files that bench and kit name: read as text (to be kept with a run) and as numbers."""

from __future__ import annotations

import io
import warnings
from pathlib import Path

import numpy as np
import numpy.typing as npt

from benchrun.yaml_source import MAX_BYTES


def read_beside(folder: Path, name: str) -> str:
    """Return the text of a file that stands in `folder`. Raises ValueError with our message."""
    if not name or "/" in name or "\\" in name:
        raise ValueError(f"'{name}' is not the name of a file beside this one")
    try:
        raw = (folder / name).read_bytes()
    except FileNotFoundError:
        raise ValueError(f"there is no file '{name}' beside this one") from None
    except (OSError, ValueError) as error:
        raise ValueError(f"'{name}' cannot be read ({error})") from None
    if len(raw) > 20 * MAX_BYTES:
        raise ValueError(f"'{name}' is larger than {20 * MAX_BYTES} bytes")
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise ValueError(f"'{name}' is not text (byte {error.start})") from None


def parse(name: str, text: str, ports: int) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.complex128]]:
    """Return frequency in Hz (F,) and S (F, ports, ports) of a Touchstone text.

    Raises ValueError with our message where it cannot be read, has other ports, or is not finite over rising
    frequencies.
    """
    from skrf import Network

    stream = io.StringIO(text)
    stream.name = name
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # what it would warn of is refused below
            network = Network(stream)
    except Exception as error:  # the reader raises whatever its parsing meets
        raise ValueError(f"'{name}' cannot be read as Touchstone ({error})") from None
    if network.nports != ports or network.f.size == 0:
        raise ValueError(
            f"'{name}' holds {network.nports} port(s) and {network.f.size} frequencies; {ports} port(s) are needed"
        )
    if np.any(np.diff(network.f) <= 0.0) or not np.all(np.isfinite(network.s)):
        raise ValueError(f"'{name}': frequencies must rise, and every value must be a number")
    return np.asarray(network.f), np.asarray(network.s)
