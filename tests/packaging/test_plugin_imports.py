"""The built-in plugins use nothing that anybody's plugin may not use: the contract and the few rooms below it."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

PLUGINS = Path(__file__).parents[2] / "plugins"
ALLOWED = (
    "benchrun.contract",
    "benchrun.errors",
    "benchrun.fields",
    "benchrun.quantities",
    "benchrun.visa.dialect",
    "benchrun.visa.scpi",
    "benchrun.yaml_source",
)


def imported(path: Path) -> Iterator[str]:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (name.name for name in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield from (f"{node.module}.{name.name}" for name in node.names)


def test_plugins_are_written_against_the_contract():
    used = {
        (path.name, name) for path in PLUGINS.rglob("*.py") for name in imported(path) if name.startswith("benchrun.")
    }
    assert len(used) > 10
    strange = {(file, name) for file, name in used if not any(f"{name}.".startswith(f"{room}.") for room in ALLOWED)}
    assert not strange
