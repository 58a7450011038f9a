"""A small recipe with every kind of step of the demo, rehearsed as a user would, and what became of it."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

from benchrun_sim.in_process import InProcessRehearsal

from benchrun.archive import ArchiveReader, open_archive
from tests.cli.conftest import Ended
from tests.faults.flow.worlds import complaints

READINGS = 5
RECIPE = """\
benchrun: 1
title: Every kind of step
bench: balloon-driver.bench.yaml
device: {part: HD-31, serial: "0042"}
receiver: {if-bandwidth: 1 kHz, averages: 1}

acquire:
  - connect: {plane: output, what: device}
  - bring-up: {gate: -2.8 V, drain: 28 V, quiescent: 350 mA, within: 10 mA, gate-range: [-3.4 V, -2.2 V]}
  - set: {probe.level: 8 dBm}
  - sweep: {drive: [14 dBm, 20 dBm]}
    do:
      - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 2}}
        do:
          - set: {probe.frequency: "{frequency}", pump.frequency: "{frequency} - 7 MHz"}
          - settle: 20 ms
          - read: {name: hot, tones: [probe, pump, image], also: [drain.voltage, drain.current, ambient.temperature]}
  - connect: {plane: input, what: meter}
  - set: {pump.level: -20 dBm, pump.frequency: 2.3 GHz, meter.frequency: 2.3 GHz}
  - settle: 10 ms
  - read: {name: levelling, waves: [], tones: [pump], also: [meter.power]}
  - connect: {plane: input, what: device}
"""
_SAFE = re.compile(r"^(\d+) of (\d+) readings are safe in (.+/archive\.sqlite)\.$", re.MULTILINE)


@dataclass(frozen=True)
class Story:
    """How one rehearsal ended, its world, and its archive."""

    ended: Ended
    world: InProcessRehearsal
    folder: Path

    @property
    def archive(self) -> ArchiveReader:
        return open_archive(self.folder)

    @property
    def message(self) -> str:
        """What was said at the end: everything behind the progress."""
        lines = self.ended.err.splitlines()
        talk = [n for n, line in enumerate(lines) if line.startswith(("Simulated instruments", "bring-"))]
        return "\n".join(lines[talk[-1] + 1 :]) if talk else self.ended.err

    def require_harmless(self) -> None:
        """Nobody came to harm, whatever happened: RF off, drain off, the gate last; the archive holds what it says."""
        assert complaints(self.world) == []
        self.require_archive()

    def require_archive(self) -> None:
        """The archive is sound, says how the run ended, and holds each reading once; the folder is the last word."""
        with self.archive as archive:
            assert archive.check() == []
            assert archive.count == archive.count_all
            state = {0: "complete", 4: "stopped", 5: "failed", 6: "unsafe"}[self.ended.code]
            assert archive.meta.state == state
            safe = _SAFE.search(self.message)
            if safe is not None:
                assert (int(safe[1]), int(safe[2]), Path(safe[3])) == (archive.count, READINGS, archive.path)
        assert self.ended.out.splitlines()[-1] == str(self.folder)
        assert "Traceback" not in self.ended.err + self.ended.out


def story_of(ended: Ended, world: InProcessRehearsal, runs: Path) -> Story:
    """Return the story of the one run in a folder of runs."""
    (folder,) = runs.iterdir()
    return Story(ended, world, folder)
