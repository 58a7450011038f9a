"""What a run says of itself afterwards: show, export, calibrations, as data for scripts."""

from __future__ import annotations

import datetime
import json
from pathlib import Path

import pytest

from benchrun.archive import open_archive
from benchrun.errors import FolderError
from benchrun.flow import calibrations, derive_again, export, show
from tests.flow.conftest import Way


def test_a_run_shows_what_it_holds(shared: Way) -> None:
    document = show(shared.hot)
    assert json.loads(json.dumps(document)) == document
    assert {key: document[key] for key in ("title", "device", "state", "origin", "readings", "readings_planned")} == {
        "title": "Hot output match against drive", "device": "HD-31 0042", "state": "complete",
        "origin": "simulated, seed 1", "readings": 27, "readings_planned": 27,
    }  # fmt: skip
    assert document["reading"] == [
        {"name": "hot", "count": 27, "each": "probe/pump/image x incident/reflected x 1 points", "flags": ""}
    ]
    assert document["results"] == ["first"]
    assert document["damage"] == []
    begun, ended = (datetime.datetime.fromisoformat(document[key]) for key in ("started_utc", "ended_utc"))
    assert begun.utcoffset() == datetime.timedelta(0)
    assert begun <= ended
    with open_archive(shared.hot) as archive:
        assert (document["digest"], document["schedule_hash"]) == (archive.digest(), archive.meta.schedule_hash)


def test_who_answered_is_in_it(shared: Way) -> None:
    who = {row["name"]: row for row in show(shared.hot)["instruments"]}
    assert set(who) == {"pump", "analyser", "meter", "supply", "ambient"}
    assert (who["analyser"]["maker"], who["analyser"]["model"]) == ("Larkmoor Instruments", "Tarn-4")
    assert all(row["serial"] and row["firmware"] for row in who.values())


def test_what_happened_is_in_it_in_order(shared: Way) -> None:
    log = show(shared.hot)["log"]
    kinds = [event["kind"] for event in log]
    assert kinds.index("calibration") < kinds.index("procedure") < kinds.index("safe-state")
    told = {event["kind"]: event["text"] for event in log}
    assert told["procedure"].startswith("gate -2.")
    assert "gate released: confirmed" in told["safe-state"]
    assert [event["at_utc"] for event in log] == sorted(event["at_utc"] for event in log)


def test_what_it_was_corrected_with_is_in_it(shared: Way) -> None:
    products = [(row["kind"], row["name"]) for row in show(shared.hot)["products"]]
    assert set(products) == {("used-calibration", "output-plane"), ("used-levelling", "drive")}
    assert [(row["kind"], row["name"]) for row in show(shared.calibration)["products"]] == [
        ("calibration", "output-plane")
    ]


def test_what_the_operator_did_is_in_a_calibration(shared: Way) -> None:
    document = show(shared.calibration)
    asked = [event["text"] for event in document["log"] if event["kind"] == "operator"]
    assert len(asked) == 7
    for text, what in zip(
        asked, ["open", "short", "match", "offset-short-1", "offset-short-2", "meter", "device"], strict=True
    ):
        assert what.upper() in text.upper()
    counts = {row["name"]: row["count"] for row in document["reading"]}
    assert counts == {"standard": 5, "power": 23}


def test_the_archive_file_itself_may_be_named(shared: Way) -> None:
    assert show(shared.hot / "archive.sqlite") == show(shared.hot)


@pytest.mark.parametrize("what", ["", "nothing-here", "recipes/hot-output-match.recipe.yaml"])
def test_what_is_no_run_is_refused(shared: Way, what: str) -> None:
    place = shared.recipes.parent / what
    for ask in (show, lambda run: derive_again(run, {}), lambda run: export(run, "csv", shared.runs / "x")):
        with pytest.raises(FolderError, match="no run"):
            ask(place)


def test_files_are_handed_on_as_they_are(shared: Way, tmp_path: Path) -> None:
    copies = export(shared.hot, "touchstone", tmp_path / "for the report")
    assert [path.name for path in copies] == sorted(path.name for path in (shared.hot / "touchstone").iterdir())
    assert all(copy.read_bytes() == (shared.hot / "touchstone" / copy.name).read_bytes() for copy in copies)
    (table,) = export(shared.hot, "csv", tmp_path / "for the report")
    assert table.read_bytes() == (shared.hot / "summary.csv").read_bytes()


def test_the_newest_result_is_handed_on(small: Way, tmp_path: Path) -> None:
    newest = derive_again(small.hot, {}).folder
    marked = newest / "touchstone" / "0042_p14.0dBm_S22.s1p"
    marked.write_bytes(marked.read_bytes() + b"! newest\n")
    copies = export(small.hot, "touchstone", tmp_path / "out")
    assert (tmp_path / "out" / marked.name).read_bytes() == marked.read_bytes()
    assert len(copies) == 6
    assert show(small.hot)["results"] == ["first", "result-002"]


def test_nothing_is_overwritten_and_then_nothing_is_copied(shared: Way, tmp_path: Path) -> None:
    (tmp_path / "0042_p30.0dBm_T22.s1p").write_text("mine")
    with pytest.raises(FolderError, match=r"0042_p30\.0dBm_T22\.s1p: is there already"):
        export(shared.hot, "touchstone", tmp_path)
    assert [path.read_text() for path in tmp_path.iterdir()] == ["mine"]


def test_what_a_run_has_not_saved_cannot_be_handed_on(shared: Way, tmp_path: Path) -> None:
    with pytest.raises(FolderError, match="no result of this run is saved as touchstone"):
        export(shared.calibration, "touchstone", tmp_path / "out")
    assert not (tmp_path / "out").exists()


def test_calibrations_are_listed_with_where_they_hold(shared: Way) -> None:
    listed = {record["name"]: record for record in calibrations(shared.runs)}
    assert set(listed) == {"output-plane", "drive"}
    output, drive = listed["output-plane"], listed["drive"]
    assert (output["kind"], output["plane"], output["origin"]) == ("calibration", "output", "simulated, seed 1")
    assert (output["from_hz"], output["to_hz"], output["run"]) == (2.18e9, 2.4e9, str(shared.calibration))
    assert (drive["kind"], drive["plane"], drive["from_hz"]) == ("levelling", "input", 2.19e9)
    assert "P3 10 dB" in output["parts"]
    assert "booster" in drive["parts"]
    for record in listed.values():
        made, until = (datetime.datetime.fromisoformat(record[key]) for key in ("made_utc", "valid_until_utc"))
        assert until - made == pytest.approx(datetime.timedelta(days=7), abs=datetime.timedelta(seconds=1))
        assert json.loads(json.dumps(record)) == record


def test_a_folder_without_runs_has_no_calibrations(tmp_path: Path) -> None:
    assert calibrations(tmp_path) == []
    assert calibrations(tmp_path / "absent") == []
