"""The driver of plugins/README.md runs as it stands there."""

from __future__ import annotations

import re
import sys
import textwrap
from importlib.metadata import EntryPoint
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from benchrun.contract.roles import InstrumentSettings, Thermometer
from benchrun.drivers.dialects import dialect_for, load_dialect
from benchrun.drivers.registry import load_registry
from tests.drivers.conftest import Rehearsed

README = (Path(__file__).parents[2] / "plugins" / "README.md").read_text(encoding="utf-8")


def _block(beginning: str) -> str:
    found = re.search(rf"(?:^    {re.escape(beginning)}.*\n)(?:^(?:    .*)?\n)+", README, re.MULTILINE)
    assert found, beginning
    return textwrap.dedent(found[0])


def test_the_driver(rehearsed: Rehearsed, monkeypatch: pytest.MonkeyPatch) -> None:
    module: Any = ModuleType("field_gear")
    exec(_block("# field_gear.py"), module.__dict__)
    monkeypatch.setitem(sys.modules, "field_gear", module)
    registry = load_registry([EntryPoint("field-gear", "field_gear", "benchrun.plugins")])
    spec = registry.drivers["ambient-probe"]
    address = rehearsed.rehearsal.addresses["ambient"]
    session = rehearsed.bus.open("ambient", address, dialect_for(spec, None), clock=rehearsed.rehearsal.clock)
    driver = spec.build(session, InstrumentSettings("ambient", {}, {}))
    assert isinstance(driver, Thermometer)
    assert driver.identify().model == "Mere-1"
    driver.prepare()
    driver.make_safe()
    assert driver.read("temperature") == pytest.approx(23.0, abs=5.0)


def test_the_dialect(rehearsed: Rehearsed, tmp_path: Path) -> None:
    path = tmp_path / "my-receiver.dialect.yaml"
    path.write_text(_block("benchrun: 1"))
    text, problems = load_dialect(path)
    assert problems == []
    assert text is not None
    assert set(text.entries) == {"waves", "if-bandwidth", "panel-lock"}
