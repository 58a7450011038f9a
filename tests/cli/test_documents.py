"""Documents for a person: names without suffixes, figures with units, nothing left out."""

from __future__ import annotations

from benchrun.cli.documents import document_lines, record_lines


def test_suffixes_become_units():
    records = [
        {
            "name": "output-plane",
            "made_utc": "2026-12-01T13:46:36.658+00:00",
            "from_hz": 2.18e9,
            "level_dbm": 8.0,
            "count": 5,
        },
        {"name": "drive", "made_utc": None, "from_hz": None, "level_dbm": -10.5, "count": 44},
    ]
    assert record_lines(records) == [
        "name          made (UTC)               from      level  count",
        "output-plane  2026-12-01 13:46:36  2.18 GHz   +8.0 dBm      5",
        "drive         -                           -  -10.5 dBm     44",
    ]


def test_records_that_have_different_keys():
    assert record_lines([{"a": "1"}, {"b": True}]) == ["a  b", "1  -", "-  yes"]
    assert record_lines([]) == []


def test_a_document_has_its_single_values_first_and_then_its_tables():
    document = {
        "title": "Hot",
        "log": [{"kind": "start"}],
        "problems": [],
        "device": {"part": "HD-31", "gain_db": 14.5},
    }
    assert document_lines(document) == [
        "title     Hot",
        "problems  none",
        "device    part HD-31, gain 14.5 dB",
        "",
        "log",
        "  kind",
        "  start",
    ]
