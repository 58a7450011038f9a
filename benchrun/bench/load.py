"""Load bench and kit files: (model, []) or (None, every problem with its place)."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from benchrun.bench.checks import bench_problems, kit_problems
from benchrun.bench.kit import Kit
from benchrun.bench.model import Bench
from benchrun.contract.roles import ROLES
from benchrun.errors import Problem
from benchrun.yaml_source import check, read_source


def load_bench(path: Path | str, roles: Mapping[str, str] | None = None) -> tuple[Bench | None, list[Problem]]:
    """Read and check a bench file.

    `roles` maps the names of the installed drivers to their roles; without it a driver that is named like a role is taken
    to have it, and other names are not judged.
    """
    source = read_source(Path(path))
    if source.data is None:
        return None, source.problems
    bench, problems = check(source, Bench, context={"folder": Path(path).parent})
    problems += source.problems
    if bench is None:
        return None, sorted(set(problems))
    bench._path = Path(path)
    bench._roles = {**dict(zip(ROLES, ROLES, strict=True)), **(roles or {})}
    problems += bench_problems(bench, source, roles)
    return (None if problems else bench), sorted(set(problems))


def load_kit(path: Path | str) -> tuple[Kit | None, list[Problem]]:
    """Read and check a kit file."""
    source = read_source(Path(path))
    if source.data is None:
        return None, source.problems
    kit, problems = check(source, Kit)
    problems += source.problems
    if kit is None:
        return None, sorted(set(problems))
    kit._path = Path(path)
    problems += kit_problems(kit, source)
    return (None if problems else kit), sorted(set(problems))
