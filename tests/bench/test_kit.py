"""Kits: definitions in SI as derive takes them, and what is told of mistakes."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from benchrun.bench import Kit, load_kit
from benchrun.derive.standards import define

KIT = """\
benchrun: 1
title: Small kit
standards:
  open: {kind: open, delay: 30 ps, loss: 0.93 Gohm/s, capacitance: [50 fF, 0.1 fF/GHz, 0 F/Hz^2, 0 F/Hz^3]}
  short: {kind: short, delay: 30 ps, inductance: [5 pH]}
  match: {kind: match, resistance: 50.2 ohm, inductance: [8 pH]}
"""
ONE_PORT = "# GHz S RI R 50\n2.0 0.5 0.1\n2.5 0.4 -0.1\n"


def load(folder: Path, old: str = "", new: str = "") -> tuple[Kit | None, list[str]]:
    assert old in KIT
    path = folder / "k.kit.yaml"
    path.write_text(KIT.replace(old, new, 1) if old else KIT, "utf-8")
    kit, problems = load_kit(path)
    return kit, [str(problem).replace(str(path), "k.kit.yaml") for problem in problems]


def test_definitions_are_in_si(tmp_path: Path) -> None:
    kit, problems = load(tmp_path)
    assert problems == []
    assert kit is not None
    assert kit.plain()["open"] == {
        "kind": "open",
        "delay_s": 30e-12,
        "loss_ohm_per_s": 0.93e9,
        "line_impedance_ohm": 50.0,
        "capacitance": [50e-15, 1e-25, 0.0, 0.0],
    }
    assert kit.plain()["short"]["inductance"] == [5e-12]
    assert kit.plain()["match"]["resistance_ohm"] == 50.2
    assert (kit.impedance_ohm, kit.text) == (50.0, KIT)


def test_derive_takes_every_definition(tmp_path: Path, recipes: Path) -> None:
    for kit in (load(tmp_path)[0], load_kit(recipes / "field-kit.kit.yaml")[0]):
        assert kit is not None
        for description in kit.plain().values():
            assert np.all(np.abs(define(description, kit.files).reflection([2.3e9])) <= 1.0 + 1e-12)


def test_a_standard_by_data_brings_its_file_along(tmp_path: Path) -> None:
    (tmp_path / "slide.s1p").write_text(ONE_PORT, "utf-8")
    kit, problems = load(
        tmp_path, "{kind: match, resistance: 50.2 ohm, inductance: [8 pH]}", "{kind: data, file: slide.s1p}"
    )
    assert problems == []
    assert kit is not None
    assert kit.files == {"slide.s1p": ONE_PORT}
    assert define(kit.plain()["match"], kit.files).reflection([2.0e9]) == pytest.approx([0.5 + 0.1j])


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        (
            "50 fF, 0.1 fF/GHz",
            "50 fF, 0.1 fF",
            "4:68: '0.1 fF' is the second coefficient here, written in fF/GHz or another unit per Hz^1.",
        ),
        ("[5 pH]", "5 pH", "5:50: a list of 1 to 4 coefficients is expected, like [5 pH]."),
        ("[5 pH]", "[5 pF]", "5:50: '5 pF' is a capacitance, where an inductance is expected, like 5 pH."),
        (
            "kind: short",
            "kind: shrot",
            "5:17: 'shrot' is not known here; expected: open, short, match, data. Did you mean 'short'?",
        ),
        ("delay: 30 ps, loss", "delay: -30 ps, loss", "4:29: '-30 ps' must be at least 0."),
        ("resistance: 50.2 ohm", "resistance: 0 ohm", "6:36: '0 ohm' must be above 0."),
        (
            "resistance: 50.2 ohm",
            "capacitance: [1 fF]",
            "6:24: 'capacitance' is not known here. Known: delay, loss, line-impedance, kind, resistance, inductance.",
        ),
        (
            "{kind: match, resistance: 50.2 ohm, inductance: [8 pH]}",
            "{kind: data, file: slide.s1p}",
            "6:29: there is no file 'slide.s1p' beside this one.",
        ),
        (
            "title: Small kit",
            "title: Small kit\nconnector: {type: N, torque: 12}",
            "3:30: '12' is a number or a switch, and a text is expected here: put it into quotes.",
        ),
        (
            "title: Small kit",
            "title: Small kit\nconnector: {type: N, torque: 12 lbf in}",
            "3:30: '12 lbf in' is not a torque, such as 1.1 N m.",
        ),
    ],
)
def test_a_mistake_is_told_at_its_place(tmp_path: Path, old: str, new: str, message: str) -> None:
    kit, problems = load(tmp_path, old, new)
    assert kit is None
    assert problems == [f"k.kit.yaml:{message}"]


def test_a_data_file_of_two_ports_is_told(tmp_path: Path) -> None:
    (tmp_path / "slide.s1p").write_text("# GHz S MA R 50\n", "utf-8")
    _, problems = load(
        tmp_path, "{kind: match, resistance: 50.2 ohm, inductance: [8 pH]}", "{kind: data, file: slide.s1p}"
    )
    assert len(problems) == 1
    assert problems[0].startswith("k.kit.yaml:6:29: 'slide.s1p'")
