"""Facts of the trade that a calibrated bench must show, through the whole tool. All: common practice, no source."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np

from benchrun import flow
from benchrun.acquire.progress import Silent

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
GRID = "{from: 2.2 GHz, to: 2.4 GHz, points: 41}"
CALIBRATE = f"""
benchrun: 1
title: Three standards
bench: same-mating.bench.yaml
kit: field-kit.kit.yaml
receiver: {{if-bandwidth: 10 Hz}}
acquire:
  - set: {{probe.level: 8 dBm}}
  - sweep: {{standard: [open, match, short]}}
    do:
      - connect: {{plane: output, what: "{{standard}}"}}
      - read: {{name: standard, over: {{frequency: {GRID}}}}}
derive:
  - calibrate: {{name: three, plane: output, standards: standard}}
save:
  - summary: {{}}
"""
AGAIN = f"""
benchrun: 1
title: The same again
bench: same-mating.bench.yaml
kit: field-kit.kit.yaml
calibrations: {{three: calibrate.recipe.yaml}}
receiver: {{if-bandwidth: 10 Hz}}
acquire:
  - set: {{probe.level: 8 dBm}}
  - connect: {{plane: output, what: short}}
  - read: {{name: again, over: {{frequency: {GRID}}}}}
derive:
  - correct: {{readings: again, calibration: three}}
  - one-port: {{readings: again}}
save:
  - summary: {{}}
"""


def test_right_after_calibration_a_full_reflection_reads_zero_db(tmp_path: Path) -> None:
    """Common practice, no source: right after calibration a thru reads within about .003 dB of zero.

    Here the thru leads to the plane and back: the short of the calibration, not taken off in between, noise and drift
    on, through archive, correction and summary.
    """
    for name in ("field-kit.kit.yaml", "simulated-wave-receiver.dialect.yaml"):
        (tmp_path / name).write_text((RECIPES / name).read_text("utf-8"), "utf-8")
    bench = (RECIPES / "balloon-driver.bench.yaml").read_text("utf-8")
    assert "rehearsal: {world: R1" in bench
    bench = bench.replace("rehearsal: {world: R1", "rehearsal: {repeatability: false, world: R1")
    (tmp_path / "same-mating.bench.yaml").write_text(bench, "utf-8")
    (tmp_path / "calibrate.recipe.yaml").write_text(CALIBRATE, "utf-8")
    (tmp_path / "again.recipe.yaml").write_text(AGAIN, "utf-8")
    result = flow.rehearse(tmp_path / "again.recipe.yaml", tmp_path / "runs", seed=4, listener=Silent())
    with (result.folder / "summary.csv").open(encoding="utf-8", newline="") as file:
        magnitude = np.array([float(row["output_reflection_magnitude_ratio"]) for row in csv.DictReader(file)])
    assert magnitude.shape == (41,)
    assert np.percentile(np.abs(20.0 * np.log10(magnitude)), 95) < 0.003
