"""What benchrun.derive offers: every name is there, none hides a module, and importing it loads no heavy library."""

from __future__ import annotations

import pkgutil
import subprocess
import sys

import benchrun.derive


def test_every_name_is_there_documented_and_hides_no_module():
    modules = {module.name for module in pkgutil.iter_modules(benchrun.derive.__path__)}
    for name in benchrun.derive.__all__:
        assert getattr(benchrun.derive, name).__doc__, name
        assert name not in modules
    assert benchrun.derive.__all__ == sorted(benchrun.derive.__all__)


def test_importing_loads_neither_scikit_rf_nor_scipy():
    heavy = (
        "import sys, benchrun.derive; print([m for m in ('skrf', 'scipy', 'pydantic', 'pyvisa') if m in sys.modules])"
    )
    found = subprocess.run([sys.executable, "-c", heavy], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"
