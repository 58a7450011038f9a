"""Each command: what it asks of flow, what it prints, how it ends."""

from __future__ import annotations

import json
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from benchrun.errors import FileProblemsError, LevelError, NoAnswerError, Problem, UnsafeError

RUN = Path("runs/2026-12-01_0042_hot-output-match")


def result(**changes):
    values = {
        "folder": RUN,
        "state": "complete",
        "exit_code": 0,
        "table": [{"drive": "+14.0 dBm", "P out": "28.1 dBm"}, {"drive": "+30.0 dBm", "P out": "42.3 dBm"}],
        "notes": ["U 0.005, k=2."],
        "message": "",
    }
    return SimpleNamespace(**(values | changes))


def test_check_prints_every_mistake_and_their_number(flow, benchrun_command):
    problems = [
        Problem("a.yaml", 9, 22, "'3,5 GHz' is not a quantity"),
        Problem("a.yaml", 14, 9, "nothing is called 'pmup'"),
    ]
    asked = []
    flow.check_files = lambda paths: asked.extend(paths) or problems
    ended = benchrun_command("check", "a.yaml", "b.yaml")
    assert asked == [Path("a.yaml"), Path("b.yaml")]
    assert ended.out.splitlines() == [
        "a.yaml:9:22: '3,5 GHz' is not a quantity",
        "a.yaml:14:9: nothing is called 'pmup'",
        "2 mistakes. Nothing was switched on.",
    ]
    assert (ended.code, ended.err) == (2, "")


def test_check_of_files_without_mistakes(flow, benchrun_command):
    flow.check_files = lambda paths: []
    assert benchrun_command("check", "a.yaml").out == "1 file checked, no mistakes.\n"
    assert benchrun_command("check", "a.yaml", "b.yaml").code == 0


def fail_over_limit():
    raise LevelError("1 level is over the limit")


def level_report(refused=False, **changes):
    row = {
        "plane": "device input", "tone": "pump", "level_dbm": 30.6, "limit_dbm": 33.0, "limit_kind": "maximum",
        "margin_db": 2.4, "note": "", "condition": {"drive_dbm": 30.0},
    }  # fmt: skip
    free = row | {"plane": "coupler, reflected arm", "limit_dbm": None, "limit_kind": None, "margin_db": None}
    rows = [SimpleNamespace(**row), SimpleNamespace(**free)]
    values = {
        "table": SimpleNamespace(rows=rows, require=fail_over_limit if refused else lambda: None),
        "duration_s": 1320.0, "operator_actions": 9,
        "readings": 1377, "axes": "17 drives x 81 frequencies", "notes": ["Expected U(S22), k=2: 0.004 to 0.006."],
        "to_dict": lambda: {"rows": [row, free], "nan": float("nan")},
    }  # fmt: skip
    return SimpleNamespace(**(values | changes))


def test_levels_shows_each_plane_with_its_limit(flow, benchrun_command):
    flow.plan_levels = lambda recipe, bench=None: level_report()
    ended = benchrun_command("levels", "hot.recipe.yaml")
    lines = ended.out.splitlines()
    assert lines[0] == "Worst case over 1377 conditions (17 drives x 81 frequencies), all reflection phases."
    assert lines[3].split() == ["device", "input", "pump", "+30.6", "dBm", "+33.0", "dBm", "maximum", "2.4", "dB"]
    assert lines[4].split() == ["coupler,", "reflected", "arm", "pump", "+30.6", "dBm", "-", "-"]
    assert "Time: 22 min, 9 operator actions." in lines
    assert lines[-1] == "Every level is inside its limit."
    assert ended.code == 0


def test_levels_refused_ends_with_3_and_does_not_say_that_all_is_well(flow, benchrun_command):
    flow.plan_levels = lambda recipe, bench=None: level_report(refused=True)
    ended = benchrun_command("levels", "hot.recipe.yaml")
    assert ended.code == LevelError.exit_code == 3
    assert ended.err == "1 level is over the limit.\n"
    assert "device input" in ended.out
    assert "inside its limit" not in ended.out
    assert benchrun_command("levels", "hot.recipe.yaml", "--json").code == 3


def test_levels_as_json_is_json_even_where_a_number_is_not_known(flow, benchrun_command):
    flow.plan_levels = lambda recipe, bench=None: level_report()
    document = json.loads(benchrun_command("levels", "hot.recipe.yaml", "--json").out, parse_constant=pytest.fail)
    assert document["nan"] is None
    assert document["rows"][0]["level_dbm"] == 30.6


def test_levels_hands_on_another_bench(flow, benchrun_command):
    asked = []
    flow.plan_levels = lambda recipe, bench=None: asked.append((recipe, bench)) or level_report()
    benchrun_command("levels", "hot.recipe.yaml", "--bench", "other.bench.yaml")
    assert asked == [(Path("hot.recipe.yaml"), Path("other.bench.yaml"))]


def test_rehearse_hands_everything_on_and_ends_with_the_run_folder(flow, benchrun_command):
    asked = {}

    def rehearse(recipe, to, **rest):
        asked.update(rest, recipe=recipe, to=to)
        rest["listener"].begin(
            "Hot output match", 1377, "Simulated instruments, virtual time. Nothing real is touched."
        )
        rest["listener"].message("gate -2.8 V")
        rest["listener"].end()
        return result()

    flow.rehearse = rehearse
    ended = benchrun_command(
        "rehearse", "hot.recipe.yaml", "--to", "runs", "--seed", 7, "--real-time", "--bench", "b.bench.yaml",
        "--calibration", "output-plane=runs/a", "--calibration", "drive=runs/b",
    )  # fmt: skip
    del asked["listener"]
    assert asked == {
        "recipe": Path("hot.recipe.yaml"), "to": Path("runs"), "bench": Path("b.bench.yaml"), "seed": 7,
        "real_time": True,
        "calibrations": {"output-plane": Path("runs/a"), "drive": Path("runs/b")},
    }  # fmt: skip
    assert ended.code == 0
    assert ended.out.splitlines()[-1] == str(RUN)
    assert ended.out.splitlines()[:2] == ["drive      P out", "+14.0 dBm  28.1 dBm"]
    assert "Nothing real is touched." in ended.err
    assert "gate -2.8 V" in ended.err


def test_a_stopped_run_says_why_and_still_ends_with_the_run_folder(flow, benchrun_command):
    flow.run = lambda *_, **__: result(
        exit_code=4, state="stopped", message="drain current 1.31 A above 1.20 A", table=[], notes=[]
    )
    ended = benchrun_command("run", "hot.recipe.yaml", "--to", "runs")
    assert ended.code == 4
    assert ended.out.splitlines() == [str(RUN)]
    assert "drain current 1.31 A above 1.20 A" in ended.err


def test_a_run_that_breaks_off_still_ends_with_the_run_folder(flow, benchrun_command):
    error = NoAnswerError("22:41:07  pump did not answer SOUR:POW? within 2 s (third time).")
    error.folder = RUN

    def run(*_, **__):
        raise error

    flow.run = run
    ended = benchrun_command("run", "hot.recipe.yaml", "--to", "runs")
    assert (ended.code, ended.out) == (5, f"{RUN}\n")
    assert "pump did not answer" in ended.err


def test_run_without_a_terminal_has_nobody_to_ask(flow, benchrun_command):
    asked = {}
    flow.run = lambda *_, **rest: asked.update(rest) or result()
    assert benchrun_command("run", "hot.recipe.yaml", "--to", "runs").code == 0
    assert not asked["prompter"].available


def test_the_caution_stands_where_power_is_switched_on(benchrun_command):
    text = benchrun_command("run", "--help").out
    assert "CAUTION" in text
    assert "hardware interlock" in text


@pytest.mark.parametrize(
    ("text", "said"),
    [("output-plane", "NAME=RUN"), ("=runs/a", "NAME=RUN"), ("output-plane=", "NAME=RUN")],
)
def test_a_calibration_that_is_not_name_and_run(flow, benchrun_command, text, said):
    ended = benchrun_command("derive", "runs/x", "--calibration", text)
    assert ended.code == 2
    assert said in ended.err


def test_a_calibration_given_twice(flow, benchrun_command):
    ended = benchrun_command("derive", "runs/x", "--calibration", "a=1", "--calibration", "a=2")
    assert ended.code == 2
    assert "twice" in ended.err


def test_derive_hands_calibrations_on(flow, benchrun_command):
    asked = []
    flow.derive_again = lambda run, calibrations: asked.append((run, calibrations)) or result()
    ended = benchrun_command("derive", RUN, "--calibration", "output-plane=runs/with=sign")
    assert asked == [(RUN, {"output-plane": Path("runs/with=sign")})]
    assert ended.out.splitlines()[-1] == str(RUN)


def test_export_prints_what_it_wrote(flow, benchrun_command):
    flow.export = lambda run, as_, to: [to / f"{as_}-1.s1p", to / f"{as_}-2.s1p"]
    ended = benchrun_command("export", RUN, "--as", "touchstone", "--to", "out")
    assert ended.out.splitlines() == [str(Path("out/touchstone-1.s1p")), str(Path("out/touchstone-2.s1p"))]
    assert benchrun_command("export", RUN, "--as", "video", "--to", "out").code == 2


def test_show_for_a_person_and_for_a_script(flow, benchrun_command):
    flow.show = lambda run: {
        "title": "Hot output match",
        "readings": np.int64(1377),
        "flags": [{"index": 3, "flag": "over-limit"}],
    }
    text = benchrun_command("show", RUN).out
    assert text.splitlines()[:2] == ["title     Hot output match", "readings  1377"]
    assert "over-limit" in text
    assert json.loads(benchrun_command("show", RUN, "--json").out)["readings"] == 1377


def test_calibrations_looks_into_runs_by_default(flow, benchrun_command):
    asked = []
    flow.calibrations = lambda folder: asked.append(folder) or []
    assert benchrun_command("calibrations").out == "No calibration in runs.\n"
    assert benchrun_command("calibrations", "elsewhere", "--json").out == "[]\n"
    assert asked == [Path("runs"), Path("elsewhere")]


def test_drivers_and_identify(flow, benchrun_command):
    flow.drivers = lambda: [{"name": "signal-source", "role": "signal-source", "from": "benchrun 0.1.0"}]
    flow.identify = lambda address, backend: {"address": address, "backend": backend, "drivers": ["signal-source"]}
    assert benchrun_command("drivers").out.splitlines()[1].split() == [
        "signal-source",
        "signal-source",
        "benchrun",
        "0.1.0",
    ]
    assert "signal-source" in benchrun_command("identify", "TCPIP0::192.0.2.21::hislip0::INSTR").out
    assert json.loads(benchrun_command("identify", "X", "--backend", "py", "--json").out) == {
        "address": "X", "backend": "py", "drivers": ["signal-source"],
    }  # fmt: skip


def test_schema_is_json_and_only_of_kinds_that_exist(flow, benchrun_command):
    flow.schema = lambda kind: {"title": kind}
    assert json.loads(benchrun_command("schema", "bench").out) == {"title": "bench"}
    assert benchrun_command("schema", "bank").code == 2


def test_simulate_prints_every_address_serves_and_closes(flow, benchrun_command):
    served = SimpleNamespace(
        hislip={"pump": "TCPIP0::127.0.0.1::hislip0,4880::INSTR"}, sockets={"pump": "TCPIP0::127.0.0.1::5025::SOCKET"},
        channel="127.0.0.1:9999", closed=0,
    )  # fmt: skip

    def wait():
        raise KeyboardInterrupt

    def close():
        served.closed += 1

    served.wait, served.close = wait, close
    asked = []
    flow.simulate = lambda *arguments: asked.append(arguments) or served
    ended = benchrun_command("simulate", "b.bench.yaml", "--seed", 3, "--write-bench", "s.bench.yaml")
    assert asked == [(Path("b.bench.yaml"), 3, Path("s.bench.yaml"))]
    assert served.closed == 1
    assert ended.code == 0
    for text in (
        "TCPIP0::127.0.0.1::hislip0,4880::INSTR",
        "TCPIP0::127.0.0.1::5025::SOCKET",
        "127.0.0.1:9999",
        "s.bench.yaml",
    ):
        assert text in ended.out


def test_mistakes_found_on_the_way_to_a_run_go_to_standard_error(flow, benchrun_command):
    def rehearse(*_, **__):
        raise FileProblemsError([Problem("a.yaml", 1, 2, "wrong"), Problem("a.yaml", 0, 0, "missing")])

    flow.rehearse = rehearse
    ended = benchrun_command("rehearse", "a.yaml", "--to", "runs")
    assert ended.code == 2
    assert ended.out == ""
    assert ended.err.splitlines() == ["a.yaml: missing", "a.yaml:1:2: wrong", "2 mistakes. Nothing was switched on."]


def test_an_unsafe_bench_outranks_everything(flow, benchrun_command):
    def run(*_, **__):
        raise UnsafeError("PUMP NOT CONFIRMED. Check it before you touch the bench.")

    flow.run = run
    ended = benchrun_command("run", "a.yaml", "--to", "runs")
    assert ended.code == 6
    assert "PUMP NOT CONFIRMED" in ended.err
