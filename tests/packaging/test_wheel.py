"""The wheel carries every module and data file of the tree, under the names by which they are imported."""

from __future__ import annotations

import email
import re
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
PACKAGES = {"benchrun": "benchrun", "plugins": "benchrun_plugins", "sim_instruments": "benchrun_sim"}
#: What stands in the packages' folders for contributors only.
NOT_PACKAGED = {".md", ".pyc"}


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> zipfile.ZipFile:
    """The wheel, built from a copy of the tree."""
    pytest.importorskip("setuptools", minversion="77", reason="building needs setuptools; the extra 'check' brings it")
    work = tmp_path_factory.mktemp("wheel")
    for folder in PACKAGES:
        shutil.copytree(ROOT / folder, work / folder, ignore=shutil.ignore_patterns("__pycache__"))
    for name in ("pyproject.toml", "README.md", "LICENSE"):
        shutil.copy(ROOT / name, work)
    build = "from setuptools.build_meta import build_wheel; build_wheel('.')"
    ended = subprocess.run([sys.executable, "-c", build], cwd=work, capture_output=True, text=True, check=False)
    assert ended.returncode == 0, ended.stderr
    (path,) = work.glob("*.whl")
    return zipfile.ZipFile(path)


def in_the_tree() -> set[str]:
    return {
        f"{package}/{path.relative_to(ROOT / folder).as_posix()}"
        for folder, package in PACKAGES.items()
        for path in (ROOT / folder).rglob("*")
        if path.is_file() and path.suffix not in NOT_PACKAGED
    }


def test_the_wheel_holds_what_the_tree_holds(wheel):
    packaged = {name for name in wheel.namelist() if ".dist-info/" not in name}
    assert packaged == in_the_tree()


def test_the_wheel_says_what_it_is(wheel):
    def text(name):
        (path,) = (path for path in wheel.namelist() if path.endswith(f".dist-info/{name}"))
        return wheel.read(path).decode()

    metadata = email.message_from_string(text("METADATA"))
    assert metadata["Name"] == "benchrun"
    assert metadata["License-Expression"] == "BSD-3-Clause"
    assert text("entry_points.txt").count("benchrun_plugins") == 1
    assert "benchrun = benchrun.__main__:main" in text("entry_points.txt")
    assert any(name.endswith("/LICENSE") for name in wheel.namelist())


def test_nothing_is_imported_by_the_folder_name():
    pattern = re.compile(r"^\s*(?:from|import) +(?:plugins|sim_instruments)\b", re.MULTILINE)
    for folder in (*PACKAGES, "tests"):
        for path in (ROOT / folder).rglob("*.py"):
            assert not pattern.search(path.read_text(encoding="utf-8")), path


def test_every_package_says_that_it_is_typed():
    assert {f"{package}/py.typed" for package in PACKAGES.values()} <= in_the_tree()
