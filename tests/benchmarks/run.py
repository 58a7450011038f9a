"""The project's figures: python tests/benchmarks/run.py [NAME ...] [--json].

Every module of this folder that has figures() is a topic, called by the module's name; without names all run. A figure
is a ratio or a count measured in one run, so that a slow or busy machine changes nothing. Exits 1 where one does not
hold.
"""

from __future__ import annotations

import argparse
import importlib.util
import json
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

FOLDER = Path(__file__).parent
ROOT = FOLDER.parents[1]
Figures = Callable[[], list[dict[str, Any]]]


def topics(names: list[str]) -> Iterator[tuple[str, Figures]]:
    """Yield the topics asked for, all where none is named. Raises SystemExit for a name that is none."""
    files = {path.stem: path for path in sorted(FOLDER.glob("*.py")) if path.name != "run.py"}
    strange = [name for name in names if name not in files]
    if strange:
        raise SystemExit(f"there is no topic {', '.join(strange)}; there are {', '.join(files)}")
    for name in names or files:
        found = getattr(_loaded(name, files[name]), "figures", None)
        if found is not None:
            yield name, found


def _loaded(name: str, path: Path) -> Any:
    spec = importlib.util.spec_from_file_location(f"benchmark_{name}", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module


def line(topic: str, figure: dict[str, Any]) -> str:
    """Return one row of the table."""
    bound = "-" if figure["bound"] is None else f"{figure['bound']:.4g}"
    verdict = "" if figure["bound"] is None else "holds" if figure["holds"] else "DOES NOT HOLD"
    return f"{topic:<12} {figure['name']:<88} {figure['figure']:>10.4g} {bound:>10}  {verdict}"


def main() -> int:
    """Run the topics and print their figures as they come, or all at once as JSON."""
    parser = argparse.ArgumentParser(description="Measure the project's figures.")
    parser.add_argument("names", nargs="*", metavar="NAME", help="topics; all where none is named")
    parser.add_argument("--json", action="store_true", help="a JSON list of {name, figure, bound, holds}")
    options = parser.parse_args()
    sys.path.insert(0, str(ROOT))
    all_figures = []
    if not options.json:
        print(f"{'topic':<12} {'figure':<88} {'measured':>10} {'bound':>10}")
    for topic, figures in topics(options.names):
        for figure in figures():
            all_figures.append(figure)
            if not options.json:
                print(line(topic, figure), flush=True)
    if options.json:
        print(json.dumps(all_figures, indent=1))
    return 0 if all(figure["holds"] for figure in all_figures) else 1


if __name__ == "__main__":
    sys.exit(main())
