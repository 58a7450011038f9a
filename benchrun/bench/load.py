"""Load bench and kit files: (model, []) or (None, every problem with its place)."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from benchrun.bench import touchstone
from benchrun.bench.checks import bench_problems
from benchrun.bench.kit import Kit, Measured
from benchrun.bench.model import Bench
from benchrun.contract.roles import ROLES
from benchrun.errors import Problem
from benchrun.yaml_source import Source, apart_from, check, read_source, salvage


def load_bench(path: Path | str, roles: Mapping[str, str] | None = None) -> tuple[Bench | None, list[Problem]]:
    """Read and check a bench file, and the Touchstone files that it names.

    `roles` maps the names of the installed drivers to their roles; without it a driver that is named like a role is
    taken to have it, and other names are not judged.
    """
    source = read_source(Path(path))
    if source.data is None:
        return None, source.problems
    files: dict[str, str] = {}
    context = {"folder": Path(path).parent, "files": files}
    bench, problems = check(source, Bench, context=context)
    problems += source.problems
    sound, left_out = (bench, frozenset[str]()) if bench is not None else salvage(source, Bench, context)
    if sound is not None:
        known = {**dict(zip(ROLES, ROLES, strict=True)), **(roles or {})}
        sound.remember(Path(path), source.text, known, files)
        problems += apart_from(bench_problems(sound, source, roles), left_out)
    return (None if problems else bench), sorted(set(problems))


def load_kit(path: Path | str) -> tuple[Kit | None, list[Problem]]:
    """Read and check a kit file, and the Touchstone files that it names."""
    source = read_source(Path(path))
    if source.data is None:
        return None, source.problems
    kit, problems = check(source, Kit)
    problems += source.problems
    if kit is not None:
        files, more = _data_files(kit, source, Path(path).parent)
        kit.remember(Path(path), source.text, files)
        problems += more
    return (None if problems else kit), sorted(set(problems))


def _data_files(kit: Kit, source: Source, folder: Path) -> tuple[dict[str, str], list[Problem]]:
    files: dict[str, str] = {}
    problems = []
    for name, standard in kit.standards.items():
        if isinstance(standard, Measured):
            try:
                files[standard.file] = touchstone.read_beside(folder, standard.file)
                touchstone.parse(standard.file, files[standard.file], ports=1)
            except ValueError as error:
                problems.append(source.problem(("standards", name, "file"), f"{error}."))
    return files, problems
