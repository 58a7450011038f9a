"""How long the demo takes: calibration, levelling and hot sweep by the command as a user starts it.

The one figure in seconds. Beside it what a bare loop over pyvisa takes for as many exchanges with the same simulated
instruments, measured in the same run: that ratio does not change with the machine.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
import time
from importlib import import_module
from pathlib import Path
from typing import Any, TypedDict
from unittest.mock import patch

import pyvisa

from benchrun.flow import rehearse
from tests.faults.flow.worlds import Worlds
from tests.flow.stage import HOT, RECIPES, Silence

MOST_S = 15.0
ROUNDS = 2


class Figure(TypedDict):
    """One figure, its bound (at most; None where it is there for comparison), and whether it holds."""

    name: str
    figure: float
    bound: float | None
    holds: bool


def figures() -> list[Figure]:
    """Return the figures of this topic."""
    worlds = _rehearsed()
    exchanges = sum(world.faults.exchanges for world in worlds.opened)
    demo_s = min(_demo_s() for _ in range(ROUNDS))
    bare_s = min(_bare_s(worlds, exchanges) for _ in range(ROUNDS))
    times = f"  times a bare pyvisa loop of {exchanges} queries (for comparison)"
    return [
        _figure("the demo (calibration, levelling, hot sweep), whole process, in s", demo_s, MOST_S),
        _figure(times, demo_s / bare_s, None),
    ]


def _demo_s() -> float:
    with tempfile.TemporaryDirectory() as place:
        command = [sys.executable, "-m", "benchrun", "rehearse", str(RECIPES / HOT), "--to", place, "--seed", "1"]
        start_s = time.perf_counter()
        subprocess.run(command, check=True, stdin=subprocess.DEVNULL, capture_output=True)
        return time.perf_counter() - start_s


def _rehearsed() -> Worlds:
    """Rehearse the demo here, for its worlds count the exchanges."""
    worlds, flow = Worlds(), import_module("benchrun.flow.rehearse")
    with tempfile.TemporaryDirectory() as place, patch.object(flow, "rehearsal_plugin", lambda: worlds):
        rehearse(RECIPES / HOT, Path(place), seed=1, listener=Silence())
    return worlds


def _bare_s(worlds: Worlds, exchanges: int) -> float:
    """Return the time of as many queries, taken in turn from every instrument of a world like the demo's."""
    wiring = worlds.last.rack.wiring
    world = worlds.open_in_process(wiring, seed=1)
    manager = pyvisa.ResourceManager(world.visa_library)
    ends: Any = {"read_termination": "\n", "write_termination": "\n"}
    links: list[Any] = [manager.open_resource(address, **ends) for address in world.addresses.values()]
    start_s = time.perf_counter()
    for number in range(exchanges):
        links[number % len(links)].query("*OPC?")
    spent_s = time.perf_counter() - start_s
    world.close()
    return spent_s


def _figure(name: str, figure: float, bound: float | None) -> Figure:
    return {"name": name, "figure": round(figure, 3), "bound": bound, "holds": bound is None or figure <= bound}


if __name__ == "__main__":
    for figure in figures():
        print(figure)
