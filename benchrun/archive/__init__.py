"""The archive: every reading, product and event of one run in one SQLite file that can be copied alone."""

from benchrun.archive.meta import Event, Meta, Product, operator_name, software_versions
from benchrun.archive.read import ArchiveReader, open_archive
from benchrun.archive.stack import Stack
from benchrun.archive.write import ArchiveWriter

__all__ = [
    "ArchiveReader",
    "ArchiveWriter",
    "Event",
    "Meta",
    "Product",
    "Stack",
    "open_archive",
    "operator_name",
    "software_versions",
]
