"""The same seed over every transport: the whole way in this process, over HiSLIP, over raw sockets."""

from __future__ import annotations

import re
import tempfile
import time
from contextlib import closing
from dataclasses import dataclass, field
from pathlib import Path
from typing import TypedDict

from benchrun.archive import open_archive
from benchrun.flow import ServedBench, rehearse, simulate
from tests.flow.stage import BENCH, HOT, Changes, Silence, recipes_in

SEED = 1
#: Dates as they stand in comments; the rest of a file is to be the same byte by byte.
_DATE = re.compile(rb"20\d\d-\d\d-\d\d[ T]\d\d:\d\d(:\d\d(\.\d+)?(\+00:00)?)?")


class Figure(TypedDict):
    """One figure, its bound (at most; None where it is there for comparison), and whether it holds."""

    name: str
    figure: float
    bound: float | None
    holds: bool


@dataclass(frozen=True, slots=True)
class Found:
    """What the whole way left behind: digest and schedule hash of each run, and its files without dates."""

    digests: dict[str, str] = field(default_factory=dict)
    schedules: dict[str, str] = field(default_factory=dict)
    files: dict[str, bytes] = field(default_factory=dict)
    duration_s: float = 0.0


def by_every_way(place: Path, changes: Changes = (), seed: int = SEED) -> dict[str, Found]:
    """Go the whole way by every transport, in folders below `place`."""
    recipes = recipes_in(place / "recipes", changes)
    found = {"in-process": _gone(recipes, place / "in-process", None, seed)}
    hislip, sockets = (place / "served" / f"{name}.bench.yaml" for name in ("hislip", "sockets"))
    with closing(simulate(recipes / BENCH, seed, hislip)) as served:
        to_sockets(served, hislip, sockets)
        found["HiSLIP"] = _gone(recipes, place / "over-hislip", hislip, seed)
        found["raw sockets"] = _gone(recipes, place / "over-sockets", sockets, seed)
    return found


def to_sockets(served: ServedBench, written: Path, target: Path) -> None:
    """Write the bench file of a served bench once more, with the addresses of its raw sockets."""
    text = written.read_text("utf-8")
    for name, address in served.hislip.items():
        assert text.count(address) == 1
        text = text.replace(address, served.sockets[name])
    target.write_text(text, "utf-8")


def _gone(recipes: Path, runs: Path, bench: Path | None, seed: int) -> Found:
    start_s = time.perf_counter()
    rehearse(recipes / HOT, runs, bench=bench, seed=seed, listener=Silence())
    found = Found(duration_s=time.perf_counter() - start_s)
    for run in sorted(runs.iterdir()):
        name = run.name.partition("_")[2]
        with open_archive(run) as archive:
            found.digests[name], found.schedules[name] = archive.digest(), archive.meta.schedule_hash
        for path in sorted([*run.glob("touchstone/*"), *run.glob("summary.csv")]):
            found.files[f"{name}/{path.name}"] = _DATE.sub(b"DATE", path.read_bytes())
    return found


def figures() -> list[Figure]:
    """Return how many runs and files of the demo differ between transports, and what a transport costs."""
    with tempfile.TemporaryDirectory() as place:
        found = by_every_way(Path(place))
    here = found.pop("in-process")
    rows = []
    for way, other in found.items():
        runs = _different(here.digests, other.digests) + _different(here.schedules, other.schedules)
        rows.append(_figure(f"digests and schedules of 3 runs that differ, {way} from in-process", runs, 0))
        files = f"files ({len(here.files)}, dates aside) that differ, {way} from in-process"
        rows.append(_figure(files, _different(here.files, other.files), 0))
        rows.append(
            _figure(f"  time over {way}, times in-process (for comparison)", other.duration_s / here.duration_s, None)
        )
    return rows


def _different(one: dict[str, str] | dict[str, bytes], other: dict[str, str] | dict[str, bytes]) -> int:
    return len(one.items() ^ other.items())


def _figure(name: str, figure: float, bound: float | None) -> Figure:
    return {"name": name, "figure": round(figure, 3), "bound": bound, "holds": bound is None or figure <= bound}


if __name__ == "__main__":
    for figure in figures():
        print(figure)
