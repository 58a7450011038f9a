"""Dialect files: read with the position of every mistake, and put over the generic dialect of a driver."""

from __future__ import annotations

from functools import cache
from pathlib import Path

from benchrun.contract.hooks import DriverSpec
from benchrun.errors import FileProblemsError, Problem
from benchrun.visa.dialect import Dialect, DialectText, compile_dialect, merged, missing
from benchrun.yaml_source import Source, check, read_source, read_text


def load_dialect(path: Path) -> tuple[DialectText | None, list[Problem]]:
    """Read a dialect file by itself: (the text, []) or (None, all mistakes with their places)."""
    return _checked(read_source(path))


@cache
def parse_dialect(text: str, file: str) -> DialectText:
    """Read the text of a dialect, once. Raises FileProblemsError with every mistake."""
    return _or_raise(_checked(read_text(text, file)))


def dialect_for(spec: DriverSpec, path: Path | None) -> Dialect:
    """Return the dialect of one instrument: the driver's generic one with that of a file over it, None for no file.

    Raises FileProblemsError where the file has mistakes, or where an entry is left open that the driver needs.
    """
    generic = parse_dialect(spec.dialect, f"dialect of driver {spec.name}")
    source = read_source(path) if path else Source(f"driver {spec.name}")
    over = _or_raise(_checked(source)) if path else None
    problems = _strangers(source, generic, over) if over else []
    dialect, wrong = compile_dialect(merged(generic, over))
    problems += [
        source.problem(_at(source, name), f"entry '{name}': {text}", at_key=True) for name, text in wrong.items()
    ]
    absent = missing(dialect, set(spec.needs) - set(wrong))
    if absent:
        advice = "give their headers in this file" if path else "name a dialect file of its make under `dialect:`"
        text = f"SCPI-1999 leaves open what driver {spec.name} needs: {', '.join(sorted(absent))}. So {advice}."
        problems.append(source.problem(("entries",), text, at_key=True) if path else Problem(source.file, 0, 0, text))
    if problems:
        raise FileProblemsError(problems)
    return dialect


def _checked(source: Source) -> tuple[DialectText | None, list[Problem]]:
    if source.data is None:
        return None, source.problems
    text, problems = check(source, DialectText)
    problems = [*source.problems, *problems]
    return (None if problems else text), problems


def _or_raise(checked: tuple[DialectText | None, list[Problem]]) -> DialectText:
    text, problems = checked
    if text is None:
        raise FileProblemsError(problems)
    return text


def _at(source: Source, name: str) -> tuple[str, ...]:
    return ("entries", name) if source.data is not None else ()


def _strangers(source: Source, generic: DialectText, over: DialectText) -> list[Problem]:
    """Tell an entry that the driver would never use, and a placeholder that it would never fill."""
    problems = []
    for name, entry in over.entries.items():
        if name not in generic.entries:
            known = ", ".join(generic.entries)
            text = f"the driver has no entry '{name}'. It has {known}."
            problems.append(source.problem(("entries", name), text, at_key=True))
            continue
        filled = generic.entries[name].carries
        for placeholder in entry.carries:
            if placeholder not in filled:
                text = (
                    f"the driver never fills {{{placeholder}}} of '{name}'. It fills {', '.join(filled) or 'nothing'}."
                )
                problems.append(source.problem(("entries", name, "carries", placeholder), text, at_key=True))
    return problems
