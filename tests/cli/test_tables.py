"""Tables: aligned, no figure cut, as narrow as asked for."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from benchrun.cli.tables import table

HEADINGS = ("drive", "P out", "output reflection, 2.30 GHz", "optimum load (extrapolated)")
ROWS = [
    ("+14.0 dBm", "28.1 dBm", "0.31 at  42 deg", "0.31 at  -42 deg  +0.44 dB"),
    ("+30.0 dBm", "42.3 dBm", "0.47 at  61 deg", "0.49 at  -57 deg  +1.1 dB"),
]


def test_columns_are_aligned_and_lines_end_without_blanks():
    assert table(("name", "value", ""), [("a", "1.0", ""), ("longer", "-10.0", "note")], right=(1,)) == [
        "name    value",
        "a         1.0",
        "longer  -10.0  note",
    ]


def test_no_rows_are_no_table():
    assert table(HEADINGS, []) == []


def test_a_narrow_terminal_folds_headings_first():
    wide = table(HEADINGS, ROWS)
    assert len(wide[0]) == 77
    narrow = table(HEADINGS, ROWS, width=70)
    assert max(map(len, narrow)) <= 70
    assert len(narrow) == 4
    assert narrow[-1].split() == wide[-1].split()


def test_the_last_column_folds_where_headings_do_not_help():
    lines = table(("plane", ""), [("device input", "0.08 dB compressed, corrected in the results")], width=40)
    assert lines == ["plane", "device input  0.08 dB compressed,", "              corrected in the results"]


cells = st.text(st.characters(codec="ascii", categories=("L", "N", "P")), max_size=12)


@given(
    st.integers(1, 5).flatmap(lambda n: st.lists(st.lists(cells, min_size=n, max_size=n), min_size=2, max_size=6)),
    st.integers(1, 90),
)
def test_nothing_is_lost_at_any_width(rows, width):
    headings, *bodies = rows
    words = sorted(word for row in rows for cell in row for word in cell.split())
    assert sorted(word for line in table(headings, bodies, width=width) for word in line.split()) == words


@given(st.lists(st.tuples(cells, cells, cells), min_size=1, max_size=6))
def test_every_line_of_one_column_starts_at_one_place(rows):
    lines = table(("first", "second", "third"), [(a or "x", b or "x", c or "x") for a, b, c in rows])
    place = lines[0].index("second")
    assert all(line[place - 1] == " " != line[place] for line in lines)


def test_a_note_for_which_nothing_is_left_goes_below_its_row():
    lines = table(("plane", "level", ""), [("measurement receiver", "-4.2 dBm", "0.08 dB compressed")], width=40)
    assert lines == ["plane                 level", "measurement receiver  -4.2 dBm", "    0.08 dB compressed"]


def test_units_that_a_column_shares_move_into_its_heading_where_that_helps():
    headings = ("drive", "gain", "note")
    rows = [("+14.0 dBm", "14.1 dB", "first"), ("+30.0 dBm", "-", "last")]
    assert table(headings, rows, width=25) == [
        "drive      gain     note",
        "+14.0 dBm  14.1 dB  first",
        "+30.0 dBm  -        last",
    ]
    assert table(headings, rows, width=20) == [
        "drive,  gain,",
        "dBm     dB     note",
        "+14.0   14.1   first",
        "+30.0   -      last",
    ]


def test_units_that_differ_stay_where_they_are():
    lines = table(("a", "b"), [("1 dB", "1 V"), ("2 dBm", "2 mV")], width=8)
    assert [word for line in lines for word in line.split()] == ["a", "b", "1", "dB", "1", "V", "2", "dBm", "2", "mV"]
