"""The whole way in order: inputs, planning, calibrations, acquisition, derivation, files. Read this room first.

inputs.py      recipe + bench + kit, read together; all mistakes at once
planning.py    -> Schedule, and the level check
known.py       calibrations and levellings in a folder of runs: which there are, which fits
measure.py     -> readings in an archive, committed before anything else; then produce.py
produce.py     archive -> results -> files, from the archive alone
rehearse.py    the same on simulated instruments;   run.py on real ones
resume.py      a run that was cut off, taken up; unchanged.py: what must be as it was; seam.py: where the new begins
report.py, subject.py   an archive -> one page that opens offline
archives.py    archives checked, recovered, packed
simulate.py, show.py, inventory.py, check.py, folders.py, result.py, summary.py: what stands beside the way
"""

from benchrun.flow.archives import check_archive, pack_run, repair_archive
from benchrun.flow.check import check_files
from benchrun.flow.inventory import drivers, identify, schema
from benchrun.flow.known import calibrations
from benchrun.flow.planning import plan_levels
from benchrun.flow.produce import derive_again
from benchrun.flow.rehearse import rehearse
from benchrun.flow.report import report
from benchrun.flow.result import LevelReport, RunResult
from benchrun.flow.resume import resume
from benchrun.flow.run import run
from benchrun.flow.show import export, show
from benchrun.flow.simulate import ServedBench, simulate

__all__ = [
    "LevelReport",
    "RunResult",
    "ServedBench",
    "calibrations",
    "check_archive",
    "check_files",
    "derive_again",
    "drivers",
    "export",
    "identify",
    "pack_run",
    "plan_levels",
    "rehearse",
    "repair_archive",
    "report",
    "resume",
    "run",
    "schema",
    "show",
    "simulate",
]
