"""The report: one HTML file of a run that opens offline, with tables that need no script and charts that unpack theirs.

subject.py     what a report is made of, all of it from the archive
figures.py     how numbers and their headings are printed
grids.py       result tables as cells; what is thinned out in huge runs
receivers.py   levels at the receivers, from the raw waves
overview.py    what was measured, with what, how it ended; the log
findings.py    flags, bounds, scalars over the run
loads.py       what other loads would take
planes.py      calibrations and levellings
charts.py      what the script draws
page.py        everything put into page.html
libraries.py   what must be installed for that
"""

from benchrun.save.report.libraries import absent_libraries, require_libraries
from benchrun.save.report.page import FILE_NAME, report_html
from benchrun.save.report.subject import Subject

__all__ = ["FILE_NAME", "Subject", "absent_libraries", "report_html", "require_libraries"]
