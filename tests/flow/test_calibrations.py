"""Which calibration a run takes, and which it refuses: always before RF is on, and saying which and why."""

from __future__ import annotations

import io
import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import apsw
import pytest

from benchrun.acquire.prompts import TerminalPrompter
from benchrun.archive import open_archive
from benchrun.cli.ending import run_to_end
from benchrun.errors import BenchrunError, CalibrationError, FileProblemsError, FolderError, InputError
from benchrun.flow import RunResult, calibrations, run
from tests.faults.flow.worlds import Worlds
from tests.flow.conftest import Way
from tests.flow.stage import BENCH, CALIBRATE, COLD, HOT, LEVEL, Silence, change


@pytest.fixture(autouse=True)
def nothing_is_reached(monkeypatch: pytest.MonkeyPatch) -> list[Any]:
    """Real instruments are out of reach here: whoever opens a VISA bus for one is seen."""
    seen: list[Any] = []

    class NoBus:
        def __init__(self, visa: Any) -> None:
            seen.append(visa)
            raise AssertionError("the bus was opened")

    import benchrun.visa.session as session

    bus = session.Bus
    monkeypatch.setattr(session, "Bus", lambda visa: NoBus(visa) if isinstance(visa, str) else bus(visa))
    return seen


def really(way: Way, recipe: str = HOT, **how: Any) -> BenchrunError:
    """Run a recipe on the real bench and return how it was refused; nothing may have been made or reached."""
    before = sorted(way.runs.iterdir())
    prompter = how.pop("prompter", TerminalPrompter(io.StringIO(), io.StringIO()))
    with pytest.raises(BenchrunError) as refused:
        run(way.recipes / recipe, how.pop("to", way.runs), listener=Silence(), prompter=prompter, **how)
    assert sorted(way.runs.iterdir()) == before
    assert refused.value.exit_code == 2
    return refused.value


def document_changed(run_folder: Path, kind: str, edit: Callable[[dict[str, Any]], None]) -> None:
    """Rewrite what a run's archive holds as its calibration or levelling."""
    connection = apsw.Connection(str(run_folder / "archive.sqlite"))
    rows = list(connection.execute("SELECT number, document FROM product WHERE kind = ?", (kind,)))
    assert rows
    for number, text in rows:
        document = json.loads(text)
        edit(document)
        connection.execute("UPDATE product SET document = ? WHERE number = ?", (json.dumps(document), number))
    connection.close()


def used(result: RunResult) -> dict[str, str]:
    """Which runs a run's calibrations came from, by their names."""
    with open_archive(result.folder) as archive:
        return {event.text.split("'")[1]: Path(event.detail["run"]).name for event in archive.log("calibration")}


# What is taken


def test_what_is_there_is_taken_and_nothing_is_made_again(
    small: Way, rehearse: Callable[..., RunResult], worlds: Worlds
) -> None:
    listener = Silence()
    result = rehearse(HOT, listener=listener)
    assert len(worlds.opened) == 1
    assert not [text for text in listener.messages if "absent" in text]
    assert used(result) == {"output-plane": small.calibration.name, "drive": small.levelling.name}


def test_the_newest_is_taken_unless_another_is_named(small: Way, rehearse: Callable[..., RunResult]) -> None:
    newer = rehearse(CALIBRATE).folder
    assert used(rehearse(COLD)) == {"output-plane": newer.name}
    older = next(path for path in small.runs.iterdir() if path.name.endswith("calibrate-output-plane"))
    assert used(rehearse(COLD, calibrations={"output-plane": older})) == {"output-plane": older.name}
    assert used(rehearse(COLD, calibrations={"output-plane": older / "archive.sqlite"})) == {"output-plane": older.name}


def test_a_calibration_of_another_seed_is_passed_over_and_made(
    small: Way, rehearse: Callable[..., RunResult], worlds: Worlds
) -> None:
    result = rehearse(COLD, seed=2)
    assert len(worlds.opened) == 2
    assert used(result)["output-plane"] != small.calibration.name


def test_one_that_is_damaged_does_not_stand_in_the_way(small: Way, rehearse: Callable[..., RunResult]) -> None:
    broken = small.runs / "2000-01-01_broken"
    broken.mkdir()
    (broken / "archive.sqlite").write_bytes(b"no archive" * 100)
    assert used(rehearse(COLD))["output-plane"].endswith("calibrate-output-plane")
    (listed,) = (record for record in calibrations(small.runs) if record["kind"] == "unreadable")
    assert (listed["run"], "no archive" in listed["note"]) == (str(broken), True)


# What is refused on the real bench


def test_a_missing_one_is_named_with_the_recipe_that_makes_it(small: Way, tmp_path: Path) -> None:
    error = really(small, to=tmp_path / "empty")
    assert isinstance(error, CalibrationError)
    for said in ("calibration 'output-plane' is missing", CALIBRATE, "Nothing was switched on"):
        assert said in str(error)
    assert not (tmp_path / "empty").exists()


def test_a_simulated_one_never_corrects_a_real_run(small: Way) -> None:
    found = really(small)
    named = really(small, calibrations={"output-plane": small.calibration, "drive": small.levelling})
    for error in (found, named):
        assert isinstance(error, CalibrationError)
        assert "simulated, seed 1, and nothing simulated ever corrects a real run" in str(error)
        assert str(small.calibration) in str(error)
        assert "Nothing was switched on" in str(error)


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("drive: drive}", "drive: output-plane}", "'output-plane' is the calibration of a plane; the drive of"),
        ("calibration: output-plane}", "calibration: drive}", "'drive' is the levelling of a drive; `correct` needs"),
    ],
)
def test_one_of_the_other_kind_is_refused_before_any_reading(
    small: Way, rehearse: Callable[..., RunResult], old: str, new: str, said: str
) -> None:
    change(small.recipes, old, new)
    before = sorted(small.runs.iterdir())
    with pytest.raises(CalibrationError, match="Nothing was switched on") as refused:
        rehearse(HOT)
    assert said in str(refused.value)
    assert sorted(small.runs.iterdir()) == before


def as_real(document: dict[str, Any]) -> None:
    document["circumstances"]["origin"] = "real"


def as_expired(document: dict[str, Any]) -> None:
    document["circumstances"] |= {
        "made_utc": "2020-05-04T10:00:00+00:00",
        "valid_until_utc": "2020-05-11T10:00:00+00:00",
    }


@pytest.fixture
def real(small: Way) -> Way:
    """The small demo as if its calibrations had been made on the real bench."""
    document_changed(small.calibration, "calibration", as_real)
    document_changed(small.levelling, "levelling", as_real)
    return small


def test_with_everything_fitting_the_instruments_are_what_comes_next(real: Way, nothing_is_reached: list[Any]) -> None:
    """Else the refusals below would prove nothing."""
    with pytest.raises(AssertionError, match="the bus was opened"):
        run(real.recipes / HOT, real.runs, listener=Silence(), prompter=TerminalPrompter(io.StringIO(), io.StringIO()))
    assert nothing_is_reached == ["py"]


@pytest.mark.parametrize("named", [False, True])
@pytest.mark.parametrize(
    ("spoil", "said"),
    [
        ("pads", "P3 was 10 dB pad; the bench now has 20 dB pad there"),
        ("expired", "expired on 2020-05-11"),
        ("grid", "covers 2.25 GHz to 2.4 GHz"),
        ("image", "covers 2.192 GHz to 2.4 GHz"),
        ("levelling", "levelling 'drive'"),
        ("levelled parts", "input-isolator was"),
        ("drive", "a drive of 33.00 dBm is wanted"),
        ("levelled grid", "levelling 'drive' covers"),
    ],
)
def test_one_that_does_not_fit_is_refused_before_rf(
    real: Way, spoil: str, said: str, named: bool, nothing_is_reached: list[Any]
) -> None:
    match spoil:
        case "pads":
            change(real.recipes, "P3: {kind: pad, loss: 10 dB", "P3: {kind: pad, loss: 20 dB")
        case "expired":
            document_changed(real.calibration, "calibration", as_expired)
        case "grid":
            document_changed(real.calibration, "calibration", lambda d: cut(d, 2.25e9))
        case "image":
            document_changed(real.calibration, "calibration", lambda d: cut(d, 2.192e9))
        case "levelling":
            document_changed(real.levelling, "levelling", as_expired)
        case "levelled parts":
            change(
                real.recipes,
                "input-isolator: {kind: isolator, loss: 0.4 dB",
                "input-isolator: {kind: isolator, loss: 0.9 dB",
            )
        case "drive":
            change(real.recipes, "to: 30 dBm, step: 8 dB", "to: 33 dBm, points: 3")
            change(real.recipes, "maximum: {input: 33 dBm", "maximum: {input: 36 dBm")
        case "levelled grid":
            change(real.recipes, 'pump.frequency: "{frequency} - 7 MHz"', 'pump.frequency: "{frequency} - 12 MHz"')
    chosen = {"output-plane": real.calibration, "drive": real.levelling} if named else {}
    error = really(real, calibrations=chosen)
    assert isinstance(error, CalibrationError | FileProblemsError)
    assert said in str(error)
    assert nothing_is_reached == []


def cut(document: dict[str, Any], from_hz: float) -> None:
    """Leave the lower end of a calibration's grid out; its lowest point is then at `from_hz`."""
    keep = [k for k, hz in enumerate(document["frequency_hz"]) if hz > from_hz]
    for values in (document, document["terms"]):
        for name, column in values.items():
            if isinstance(column, list):
                values[name] = [column[k] for k in [keep[0], *keep]]
    document["frequency_hz"][0] = from_hz


def test_what_does_not_cover_the_image_is_refused_in_a_rehearsal_too(
    small: Way, rehearse: Callable[..., RunResult], worlds: Worlds
) -> None:
    change(small.recipes, "from: 2.18 GHz, to: 2.4 GHz", "from: 2.19 GHz, to: 2.4 GHz")
    narrow = rehearse(CALIBRATE).folder
    for chosen in ({}, {"output-plane": narrow}):
        with pytest.raises(
            CalibrationError, match=r"covers 2\.19 GHz to 2\.4 GHz; .*image included, run from 2\.186 GHz"
        ):
            rehearse(HOT, calibrations=chosen)
    assert len(worlds.opened) == 1
    rehearse(HOT, calibrations={"output-plane": small.calibration})


@pytest.mark.parametrize(
    ("chosen", "kind", "said"),
    [
        (
            {"outputplane": "calibration"},
            CalibrationError,
            "uses no calibration of this name; it uses output-plane, drive",
        ),
        ({"output-plane": "levelling"}, CalibrationError, "this run made no calibration 'output-plane'"),
        ({"output-plane": "runs"}, FolderError, "no run here"),
    ],
)
def test_a_choice_that_cannot_be_is_refused(
    small: Way, chosen: dict[str, str], kind: type[Exception], said: str
) -> None:
    error = really(small, calibrations={name: getattr(small, run) for name, run in chosen.items()})
    assert isinstance(error, kind)
    assert said in str(error)


# Prompts


@pytest.mark.parametrize(("recipe", "times"), [(CALIBRATE, 7), (LEVEL, 2)])
def test_a_recipe_that_asks_is_refused_where_nobody_can_answer(
    small: Way, recipe: str, times: int, nothing_is_reached: list[Any]
) -> None:
    error = really(small, recipe)
    assert isinstance(error, InputError)
    assert f"asks the operator {times} times, and there is no terminal" in str(error)
    assert nothing_is_reached == []


def test_a_bench_marked_simulated_is_no_real_one(small: Way) -> None:
    bench = small.recipes / BENCH
    bench.write_text(bench.read_text() + "simulated: true\nrehearsal-channel: 127.0.0.1:9\n")
    error = really(small)
    assert "marked simulated" in str(error)
    assert "benchrun rehearse" in str(error)


def test_the_command_says_it_in_one_message_and_ends_with_2(
    small: Way, capsys: pytest.CaptureFixture[str], nothing_is_reached: list[Any]
) -> None:
    assert run_to_end(["run", str(small.recipes / HOT), "--to", str(small.runs)]) == 2
    written = capsys.readouterr()
    assert written.out == ""
    assert written.err.count("calibration 'output-plane' is missing") == 1
    assert "Traceback" not in written.err
    assert nothing_is_reached == []


def test_recipes_of_calibrations_are_read_before_they_are_wanted(
    small: Way, rehearse: Callable[..., RunResult]
) -> None:
    shutil.rmtree(small.runs)
    (small.recipes / CALIBRATE).unlink()
    with pytest.raises(FileProblemsError, match=CALIBRATE):
        rehearse(HOT)
    assert not small.runs.exists()
