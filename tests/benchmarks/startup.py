"""What `benchrun --help` costs: heavy modules imported, entry points scanned, its time beside `import click`."""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from typing import TypedDict

HEAVY = ("pydantic", "numpy", "pyvisa", "skrf", "rich", "apsw", "pluggy", "ruamel")
HELP = "import sys; sys.argv = ['benchrun', '--help']; from benchrun.__main__ import main; main()"
BARE = "import click"
ROUNDS = 15


class Figure(TypedDict):
    """One figure, its bound (at most), and whether it holds."""

    name: str
    figure: float
    bound: float
    holds: bool


def figures() -> list[Figure]:
    """Return the figures of this topic."""
    modules = _modules_after_help()
    return [
        _at_most("benchrun --help: heavy modules imported", sum(name in modules for name in HEAVY), 0),
        _at_most("benchrun --help: modules that scan entry points", int("importlib.metadata" in modules), 0),
        _at_most("benchrun --help: time, times that of python -c 'import click'", _time_ratio(), 1.7),
    ]


def _at_most(name: str, figure: float, bound: float) -> Figure:
    return {"name": name, "figure": figure, "bound": bound, "holds": figure <= bound}


def _modules_after_help() -> set[str]:
    """Return the names of all modules in a process that has printed the help."""
    code = f"import sys\ntry:\n    exec({HELP!r})\nfinally:\n    print(*sys.modules, file=sys.stderr)"
    ended = _python(code, stderr=subprocess.PIPE)
    return set(ended.stderr.decode().split())


def _time_ratio() -> float:
    """Return the ratio of the median times, both measured turn by turn so that a busy machine slows both."""
    pairs = [(_time_s(HELP), _time_s(BARE)) for _ in range(ROUNDS)]
    return statistics.median(help_s for help_s, _ in pairs) / statistics.median(bare_s for _, bare_s in pairs)


def _time_s(code: str) -> float:
    start_s = time.perf_counter()
    _python(code)
    return time.perf_counter() - start_s


def _python(code: str, stderr: int = subprocess.DEVNULL) -> subprocess.CompletedProcess[bytes]:
    return subprocess.run(
        [sys.executable, "-c", code],
        check=True,
        stdin=subprocess.DEVNULL,
        stdout=subprocess.DEVNULL,
        stderr=stderr,
    )


if __name__ == "__main__":
    for figure in figures():
        print(figure)
