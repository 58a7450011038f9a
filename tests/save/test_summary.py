"""CSV tables: read back by the csv module, units in every column's name, unknown numbers as nothing."""

from __future__ import annotations

import csv
import io

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.derive.results import Table
from benchrun.save.summary import csv_text, write_summary
from tests.derive.test_pipeline import hot
from tests.derive.virtual_bench import VirtualBench

UNITS = {"dbm", "db", "hz", "ratio", "deg", "v", "a", "degc", "w"}


def read(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_numbers_texts_and_unknowns():
    table = Table("t", {"drive_dbm": np.array([14.0, np.nan]), "flags": np.array(["a, b", ""])})
    assert read(csv_text(table)) == [{"drive_dbm": "14", "flags": "a, b"}, {"drive_dbm": "", "flags": ""}]


texts = st.text(min_size=1, max_size=20).filter(lambda text: "\x00" not in text and text != "power_dbm")


@settings(deadline=None)
@given(st.lists(st.floats(-1e12, 1e12), min_size=1, max_size=10), texts)
def test_any_table_comes_back(numbers, text):
    table = Table("t", {"power_dbm": np.array(numbers), text: np.array([text] * len(numbers), dtype=object)})
    rows = list(csv.reader(io.StringIO(csv_text(table), newline="")))
    assert rows[0] == ["power_dbm", text]
    assert [row[1] for row in rows[1:]] == [text] * len(numbers)
    np.testing.assert_allclose([float(row[0]) for row in rows[1:]], numbers, rtol=1e-9, atol=0)


def test_the_hot_table_has_its_units_in_every_name():
    table = hot(VirtualBench()).tables[0]
    for name in table.columns:
        assert name == "flags" or name.rsplit("_", 1)[-1] in UNITS, name
    rows = read(csv_text(table))
    assert list(rows[0])[:2] == ["drive_dbm", "frequency_hz"]
    assert float(rows[0]["frequency_hz"]) == 2.2e9
    assert "t22_phase_from_twice_b2_pump_deg" in rows[0]


def test_files_of_several_tables(tmp_path):
    tables = (Table("hot-match", {"a_db": np.array([1.0])}), Table("../one port", {"b_db": np.array([2.0])}))
    assert [p.relative_to(tmp_path).as_posix() for p in write_summary(tmp_path, tables)] == [
        "summary.csv",
        "summary-one-port.csv",
    ]
    assert (tmp_path / "summary.csv").read_bytes() == b"a_db\r\n1\r\n"
