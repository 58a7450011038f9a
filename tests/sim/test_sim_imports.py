"""The simulated bench shares no code with the product: shared code would hide shared mistakes."""

from __future__ import annotations

import ast
from pathlib import Path

import benchrun_sim
import pytest

FILES = sorted(Path(benchrun_sim.__file__).parent.rglob("*.py"))


@pytest.mark.parametrize("path", FILES, ids=lambda path: path.name)
def test_no_import_of_the_product(path: Path) -> None:
    imported = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            imported |= {alias.name.partition(".")[0] for alias in node.names}
        if isinstance(node, ast.ImportFrom) and not node.level:
            imported.add((node.module or "").partition(".")[0])
    assert not imported & {"benchrun", "benchrun_plugins", "plugins"}


def test_there_are_files_to_look_at() -> None:
    assert len(FILES) > 20
