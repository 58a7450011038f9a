"""Draw the README's picture from a run folder of the demo: `python recipes/pictures/draw.py RUN`.

Needs the extra `pictures`. Reads the Touchstone files that the run saved, nothing else, so that the picture stays true.
"""

from __future__ import annotations

import re
import sys
from pathlib import Path

import matplotlib as mpl

mpl.use("Agg")

import matplotlib.pyplot as plt
import numpy as np
import skrf

HERE = Path(__file__).resolve().parent
AT_HZ = 2.3e9
NAME = re.compile(r"_([pm]\d+\.\d)dBm_(S22|T22)\.s1p$")


def read(run: Path, what: str) -> list[tuple[float, skrf.Network]]:
    """Return (drive in dBm, network) for each file of this kind, by rising drive."""
    found = []
    for path in sorted((run / "touchstone").glob(f"*_{what}.s1p")):
        match = NAME.search(path.name)
        if match:
            drive_dbm = float(match[1].replace("p", "+").replace("m", "-"))
            found.append((drive_dbm, skrf.Network(str(path))))
    return sorted(found, key=lambda pair: pair[0])


def draw(run: Path, target: Path) -> None:
    """Draw hot output reflection on the Smith chart, and both coefficients at one frequency against drive."""
    s22, t22 = read(run, "S22"), read(run, "T22")
    colours = plt.get_cmap("cividis")(np.linspace(0, 0.9, len(s22)))
    figure, (chart, graph) = plt.subplots(1, 2, figsize=(10, 4.6), layout="constrained", width_ratios=[1, 1.15])
    skrf.plotting.smith(ax=chart, smithR=1, chart_type="z", draw_labels=False, ref_imm=1.0)
    for colour, (drive_dbm, network) in zip(colours, s22, strict=True):
        gamma = network.s[:, 0, 0]
        ends = drive_dbm in (s22[0][0], s22[-1][0])
        chart.plot(
            gamma.real, gamma.imag, color=colour, lw=2 if ends else 1, label=f"{drive_dbm:+.0f} dBm" if ends else None
        )
    chart.set(title="Hot output reflection, 2.2 to 2.4 GHz", xticks=[], yticks=[])
    chart.legend(loc="lower left", frameon=False, title="drive")
    drives = [drive_dbm for drive_dbm, _ in s22]
    for networks, mark, label in ((s22, "o-", "|output reflection|"), (t22, "s--", "|T22|")):
        values = [abs(n.s[np.argmin(np.abs(n.f - AT_HZ)), 0, 0]) for _, n in networks]
        graph.plot(drives, values, mark, color="0.15" if mark == "o-" else "0.5", ms=4, label=label)
    graph.set(
        xlabel="drive at the device-input plane, dBm",
        ylabel="magnitude",
        title="At 2.30 GHz, probe 7 MHz above the pump",
    )
    graph.set_ylim(bottom=0)
    graph.grid(alpha=0.3)
    graph.legend(frameon=False)
    figure.suptitle("HD-31 no. 0042, simulated bench", fontsize=10, color="0.4")
    figure.savefig(target, dpi=110)


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("usage: python recipes/pictures/draw.py RUN")
    draw(Path(sys.argv[1]), HERE / "hot-output-match.png")
