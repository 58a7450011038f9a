"""Results become files: Touchstone, summary, in a folder of their own number."""

from benchrun.save.folder import save_results
from benchrun.save.summary import csv_text, write_summary
from benchrun.save.touchstone import file_name, touchstone_text, write_touchstone

__all__ = ["csv_text", "file_name", "save_results", "touchstone_text", "write_summary", "write_touchstone"]
