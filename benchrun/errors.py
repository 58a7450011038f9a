"""Every exception that benchrun raises on purpose, split by whose fault it is.

::

    BenchrunError                    exit 1   (never raised itself: whatever arrives as plain Exception is our defect)
    |-- InputError                   exit 2   what somebody wrote or asked for is wrong
    |   |-- QuantityError                     a text is not a quantity of the wanted kind
    |   |-- FileProblemsError                 a bench, recipe, dialect or kit file has mistakes (all, with positions)
    |   |-- CalibrationError                  a calibration is missing, or does not fit the bench, plane, grid or date
    |   |-- DataSetError                      readings or standards do not allow what derive was asked for
    |   |-- FolderError                       a run folder cannot be made, found or read
    |   `-- PluginError                       an installed plugin breaks the contract
    |-- LevelError                   exit 3   the level check refused the schedule; nothing was switched on
    |-- StoppedError                 exit 4   a guard or a person stopped the run
    |-- BenchError                   exit 5   the bench failed: an instrument, a link or a disk
    |   |-- LinkError                         nothing listens, or the link broke
    |   |   `-- NoAnswerError                 no answer within the deadline
    |   |-- InstrumentError                   the instrument reported an error or did not take a setting
    |   |-- IdentityError                     another instrument answered than the driver expects
    |   |-- ReplyError                        an answer or a data block is malformed, short, or not a number
    |   `-- DiskError                         the archive could not be written
    `-- UnsafeError                  exit 6   the safe state could not be confirmed; outranks all others

Each error carries a message that says where, what, what was expected and what to do next.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import ClassVar


class BenchrunError(Exception):
    """Base of everything that benchrun raises on purpose."""

    exit_code: ClassVar[int] = 1


class InputError(BenchrunError):
    """What somebody wrote or asked for is wrong."""

    exit_code = 2


class QuantityError(InputError):
    """A text is not a quantity of the wanted kind."""


@dataclass(frozen=True, slots=True, order=True)
class Problem:
    """One mistake in a file: lines and columns count from 1; 0 means the file as a whole."""

    file: str
    line: int
    column: int
    message: str

    def __str__(self) -> str:
        if self.line == 0:
            return f"{self.file}: {self.message}"
        return f"{self.file}:{self.line}:{self.column}: {self.message}"


class FileProblemsError(InputError):
    """One or more files have mistakes; all of them are carried, in order of position."""

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems: tuple[Problem, ...] = tuple(sorted(set(problems)))
        super().__init__("\n".join(str(problem) for problem in self.problems))


class CalibrationError(InputError):
    """A calibration is missing, or does not fit the bench, the plane, the grid or the date."""


class DataSetError(InputError):
    """Readings or standards do not allow what derive was asked for."""


class FolderError(InputError):
    """A run folder cannot be made, found or read."""


class PluginError(InputError):
    """An installed plugin breaks the contract; names the plugin, the hook and the argument at fault."""


class LevelError(BenchrunError):
    """The level check refused the schedule; nothing was switched on."""

    exit_code = 3


class StoppedError(BenchrunError):
    """A guard or a person stopped the run."""

    exit_code = 4


class BenchError(BenchrunError):
    """The bench failed: an instrument, a link or a disk."""

    exit_code = 5


class LinkError(BenchError):
    """Nothing listens at the address, or the link broke."""


class NoAnswerError(LinkError):
    """No answer within the deadline."""


class InstrumentError(BenchError):
    """The instrument reported an error, or did not take a setting."""


class IdentityError(BenchError):
    """Another instrument answered than the driver expects."""


class ReplyError(BenchError):
    """An answer or a data block is malformed, short, or not a number."""


class DiskError(BenchError):
    """The archive could not be written; what was committed is still there."""


class UnsafeError(BenchrunError):
    """The safe state could not be confirmed: look at the bench before you touch it."""

    exit_code = 6
