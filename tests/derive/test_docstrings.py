"""The examples in the docstrings of derive and save run as they stand."""

from __future__ import annotations

import doctest
import importlib
import pkgutil

import pytest

import benchrun.derive
import benchrun.save

MODULES = [
    f"{room.__name__}.{m.name}"
    for room in (benchrun.derive, benchrun.save)
    for m in pkgutil.iter_modules(room.__path__)
]


@pytest.mark.parametrize("module", MODULES)
def test_examples(module):
    assert doctest.testmod(importlib.import_module(module)).failed == 0


def test_there_are_examples():
    finder = doctest.DocTestFinder()
    assert sum(bool(t.examples) for m in MODULES for t in finder.find(importlib.import_module(m))) >= 7
