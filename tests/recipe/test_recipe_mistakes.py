"""Mistakes in a recipe file: each told at its place, with what was expected and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from benchrun.bench import Bench
from benchrun.contract.hooks import StepSpec
from benchrun.recipe import load_recipe

Told = Callable[..., list[str]]


def test_the_recipe_is_right(told: Told) -> None:
    assert told() == []
    assert told(with_bench=False) == []


@pytest.mark.parametrize(
    ("old", "new", "at", "message"),
    [
        (
            "title: Hot output match\n",
            "titel: Hot output match\n",
            "titel",
            "'titel' is not known here. Did you mean 'title'?",
        ),
        (
            "300 Hz",
            "300 Ghz",
            "300 Ghz",
            "'300 Ghz': the unit is written GHz. Did you mean 300 GHz?",
        ),
        (
            "300 Hz",
            "300",
            "300",
            "'300' has no unit: a frequency is written with one, like 2.9 GHz.",
        ),
        (
            "300 Hz",
            "1e999 Hz",
            "1e999 Hz",
            "'1e999 Hz' is beyond any number that can be carried; check the exponent.",
        ),
        (
            "300 Hz",
            "0 Hz",
            "0 Hz",
            "'0 Hz' must be above 0.",
        ),
        (
            "- settle: 20 ms",
            "- settel: 20 ms",
            "settel",
            "there is no step 'settel'. Did you mean 'settle'? There is: sweep, ask, bring-up, connect, "
            "read, set, settle.",
        ),
        (
            "- settle: 20 ms",
            "- settle: 20 mA",
            "20 mA",
            "'20 mA' is a current, where a time is expected, like 20 ms.",
        ),
        (
            "- settle: 20 ms",
            "- settle",
            "settle",
            "a step is one key with its values, such as `- settle: 20 ms`; known: sweep, ask, bring-up, "
            "connect, read, set, settle.",
        ),
        (
            "          - settle: 20 ms",
            "            settle: 20 ms",
            "set",
            "one step has one key; this one has set, settle. Begin each with a hyphen of its own.",
        ),
        (
            "probe.level: 8 dBm",
            "probe.level: 3,5 dBm",
            "3",
            "'3,5 dBm' is not a quantity: the decimal mark is a point. Did you mean 3.5 dBm?",
        ),
        (
            "probe.level: 8 dBm",
            "probe.level: 10 min",
            "10 min",
            "'10 min' is a time, where a level is expected, like -10 dBm.",
        ),
        (
            "probe.level: 8 dBm",
            "probe.level: 8",
            "8",
            "'8' has no unit: a level is written with one, like -10 dBm.",
        ),
        (
            "probe.level: 8 dBm",
            "prob.level: 8 dBm",
            "prob.level",
            "nothing on the bench is called 'prob.level'. It has probe.level, pump.level, pump.frequency, "
            "probe.frequency, gate.voltage, gate.current-limit, drain.voltage, drain.current-limit, "
            "meter.frequency, drive.",
        ),
        (
            "probe.level: 8 dBm",
            "ambient.temperature: 20 degC",
            "ambient.temperature",
            "'ambient.temperature' can be read, not set. What can be set: pump.frequency, pump.level, "
            "probe.frequency, probe.level, gate.voltage, gate.current-limit, drain.voltage, "
            "drain.current-limit, meter.frequency, drive.",
        ),
        (
            "{frequency} - 7 MHz",
            "{frequncy} - 7 MHz",
            '"{frequncy',
            "'{frequncy}' refers to nothing here. What is swept around it: {drive}, {frequency}.",
        ),
        (
            "{frequency} - 7 MHz",
            "{frequency} - 7 MHZ",
            '"{frequency',
            "'7 MHZ': the unit is written MHz. Did you mean 7 MHz?",
        ),
        (
            "{frequency} - 7 MHz",
            "{frequency} * 2",
            '"{frequency',
            "'{frequency} * 2' is not a sum of references and quantities, such as '{frequency} - 7 MHz'.",
        ),
        (
            "{frequency} - 7 MHz",
            "{frequency}-7 MHz",
            '"{frequency',
            "'{frequency}-7 MHz' is not a sum of references and quantities, such as '{frequency} - 7 MHz'.",
        ),
        (
            "{frequency} - 7 MHz",
            "{drive}",
            '"{drive',
            "'{drive}' is a level, and 'pump.frequency' is a frequency.",
        ),
        (
            "{drive: {from: 14 dBm",
            "{drive: {from: 14,5 dBm",
            "14",
            "'14,5 dBm' is not a quantity: the decimal mark is a point. Did you mean 14.5 dBm?",
        ),
        (
            "{drive: {from: 14 dBm",
            "{drive: {from: 14",
            "14",
            "'14' has no unit: a level is written with one, like -10 dBm.",
        ),
        (
            "{drive: {from: 14 dBm",
            "{drive: {form: 14 dBm",
            "{form",
            "a sweep goes over a list, [1 V, 2 V], or a range, {from: 1 V, to: 2 V, points: 11} or {from: "
            "1 V, to: 2 V, step: 0.1 V}; here stands form, to, step.",
        ),
        (
            "step: 1 dB",
            "step: 1 dBm",
            "1 dBm",
            "'1 dBm' is a level, where a ratio is expected, like 20 dB.",
        ),
        (
            "step: 1 dB",
            "step: -1 dB",
            "-1 dB",
            "'-1 dB': a step is written without a sign, and is not 0.",
        ),
        (
            "step: 1 dB",
            "step: 3 dB",
            "3 dB",
            "steps of 3 dB from 14 dBm reach 29 dBm, not 30 dBm: change one of them.",
        ),
        (
            "step: 1 dB",
            "step: 1e-9 dB",
            "1e-9 dB",
            "16000000001 points; a sweep has 1 to 10000000.",
        ),
        (
            "sweep: {drive:",
            "sweep: {pmup.level:",
            "pmup.level",
            "nothing on the bench is called 'pmup.level'. It has pump.level, probe.level, pump.frequency, "
            "probe.frequency, gate.voltage, gate.current-limit, drain.voltage, drain.current-limit, "
            "meter.frequency, drive.",
        ),
        (
            "sweep: {drive:",
            "sweep: {dirve:",
            "dirve",
            "nothing on the bench is called 'dirve'. It has drive, pump.frequency, pump.level, "
            "probe.frequency, probe.level, gate.voltage, gate.current-limit, drain.voltage, "
            "drain.current-limit, meter.frequency. A name of your own can be swept where a step inside "
            'refers to it: "{dirve}".',
        ),
        (
            "sweep: {drive: {from: 14 dBm, to: 30 dBm, step: 1 dB}}",
            "sweep: {ambient.temperature: [20 degC, 30 degC]}",
            "ambient.temperature",
            "'ambient.temperature' can be read, not set. What can be set: pump.frequency, pump.level, "
            "probe.frequency, probe.level, gate.voltage, gate.current-limit, drain.voltage, "
            "drain.current-limit, meter.frequency, drive.",
        ),
        (
            "sweep: {frequency: {from: 2.2 GHz",
            "sweep: {frequency: {from: 2.2",
            "2.2",
            "'2.2' has no unit: a frequency is written with one, like 2.9 GHz.",
        ),
        (
            "points: 81}}\n        do:",
            "points: 0}}\n        do:",
            "0",
            "0 points; a sweep has 1 to 10000000.",
        ),
        (
            "points: 81}}\n        do:",
            "points: many}}\n        do:",
            "many",
            "'many' is not a quantity; a count is written like 81.",
        ),
        (
            "points: 81}}\n        do:",
            "points: 1}}\n        do:",
            "1",
            "one point cannot reach from one value to another; use a list.",
        ),
        (
            "[open, short, match]",
            "[open, short, 3 V]",
            "[open",
            "a sweep goes over words or over quantities, not over both.",
        ),
        (
            "[open, short, match]",
            "[]",
            "[",
            "a sweep goes over a list, [1 V, 2 V], or a range, {from: 1 V, to: 2 V, points: 11} or {from: "
            "1 V, to: 2 V, step: 0.1 V}.",
        ),
        (
            "{frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 81}}\n        do",
            "{drive: [14 dBm, 15 dBm]}\n        do",
            "drive",
            "'drive' is swept around this already.",
        ),
        (
            "{drive: {from: 14 dBm, to: 30 dBm, step: 1 dB}}",
            "{drive: [1 dBm], probe.level: [1 dBm]}",
            "{drive",
            "a sweep goes over one name, such as {drive: {from: 14 dBm, to: 30 dBm, step: 1 dB}}; nest "
            "sweeps for more.",
        ),
        (
            "  - sweep: {standard: [open, short, match]}\n    do:",
            "  - sweep: {standard: [open, short, match]}\n    dou:",
            "dou",
            "'dou' is not known here. A sweep has the keys sweep and do.",
        ),
        (
            "{standard: [open, short, match]}\n    do:\n      - connect: {plane: output, what: "
            '"{standard}"}\n      - read',
            "{drain.voltage: [28 V]}\n    do: {a: 1}\n  - read",
            "{a",
            "a list of steps is expected here, each beginning with a hyphen.",
        ),
        (
            "name: hot, tones",
            "name: hot, tone",
            "tone",
            "'tone' is not known here. Did you mean 'tones'?",
        ),
        (
            "correct: {readings: hot",
            "correct: {readings: cold",
            "cold",
            "there is no reading 'cold'. There is: hot, standards.",
        ),
        (
            "calibration: output-plane}",
            "calibration: outputplane}",
            "outputplane",
            "there is no calibration 'outputplane'. Did you mean 'output-plane'? There is: output-plane, "
            "drive. Name the recipe that makes it under `calibrations`.",
        ),
        (
            "hot-match: {readings: hot, drive: drive}",
            "hot-match: {readings: hot, drive: driv}",
            "driv",
            "there is no calibration 'driv'. Did you mean 'drive'? There is: output-plane, drive. Name "
            "the recipe that makes it under `calibrations`.",
        ),
        (
            "  - correct: {readings: hot, calibration: output-plane}\n",
            "",
            "hot",
            "'hot' is not corrected yet: put `- correct: {readings: hot, calibration: ...}` before this.",
        ),
        (
            "hot-match: {",
            "hot-mach: {",
            "hot-mach",
            "there is no entry of derive 'hot-mach'. Did you mean 'hot-match'? There is: correct, "
            "one-port, hot-match, calibrate, level.",
        ),
        (
            "kit: field-kit.kit.yaml\n",
            "",
            "calibrate",
            "no kit is named that says what the standards are: write `kit: FILE.kit.yaml` at the top.",
        ),
        (
            "plane: output, standards",
            "plane: outptu, standards",
            "outptu",
            "'outptu' is not known here; expected: input, output. Did you mean 'output'?",
        ),
        (
            "plane: output, standards",
            "plane: input, standards",
            "input",
            "no coupler's two arms are read at the input plane; a calibration needs an incident and a reflected "
            "receiver there.",
        ),
        (
            "tones: [probe, pump, image]",
            "tones: [probe, pmp, image]",
            "{name: hot",
            "the image lies where probe and pump are both on: tones: [probe, pump, image]. "
            "Here stands [probe, pmp, image].",
        ),
        (
            "- calibrate: {name: output-plane, plane: output, standards: standards}",
            "- level: {name: x, signal: pmup, plane: input, readings: hot, valid-for: 2 d}",
            "2 d",
            "'2 d': there is no unit d. A time is written in s, fs, ps, ns, us, ms, min or h.",
        ),
        (
            "- calibrate: {name: output-plane, plane: output, standards: standards}",
            "- level: {name: x, signal: pmup, plane: input, readings: hot}",
            "pmup",
            "there is no signal 'pmup'. Did you mean 'pump'? There is: pump, probe.",
        ),
        (
            "  - touchstone: {}",
            "  - touchston: {}",
            "touchston",
            "there is no entry of save 'touchston'. Did you mean 'touchstone'? There is: touchstone, summary, report.",
        ),
        (
            "  - touchstone: {}",
            "  - touchstone",
            "touchstone",
            "an entry of save is one key with its values; known: touchstone, summary, report.",
        ),
        (
            'what: "{standard}"',
            "what: {standard}",
            "{standard",
            'a text is expected here, not a mapping (a reference is written in quotes: "{standard}").',
        ),
    ],
)
def test_a_mistake_is_told_at_its_place(told: Told, old: str, new: str, at: str, message: str) -> None:
    places = [one.removesuffix(f": {message}").split(":") for one in told(old, new) if one.endswith(f": {message}")]
    ((file, line, column),) = places
    assert Path(file).read_text("utf-8").splitlines()[int(line) - 1][int(column) - 1 :].startswith(at)


def test_all_mistakes_come_at_once_and_each_once(told: Told) -> None:
    messages = told("300 Hz", "3,5 GHz", "sweep: {drive:", "sweep: {pmup.level:", "name: hot, tones", "name: hot, tone")
    assert [message.split(":")[1] for message in messages] == ["7", "11", "17"]


def test_a_sweep_with_a_mistake_still_has_its_readings(told: Told) -> None:
    assert len(told("{from: 14 dBm", "{from: 14 dB")) == 1


def test_without_a_bench_its_names_are_not_judged(told: Told) -> None:
    assert told("probe.level: 8 dBm", "prob.level: 8 dBm", with_bench=False) == []
    assert told("sweep: {drive:", "sweep: {pmup.level:", with_bench=False) == []


def test_only_what_is_not_yaml_ends_early(told: Told) -> None:
    (only,) = told("300 Hz}", "300 Hz", "probe.level: 8 dBm", "prob.level: 8 dBm")
    assert "this is not YAML" in only


@given(line=st.integers(0, 60), text=st.text("abc:{}[]-,# 1.\"'", max_size=20))
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow], max_examples=60)
def test_any_spoilt_line_is_a_recipe_or_told(
    tmp_path: Path, recipes: Path, example_bench: Bench, steps: dict[str, StepSpec], line: int, text: str
) -> None:
    lines = (recipes / "hot-output-match.recipe.yaml").read_text("utf-8").split("\n")
    lines[line % len(lines)] = text
    path = tmp_path / "spoilt.recipe.yaml"
    path.write_text("\n".join(lines), "utf-8")
    recipe, problems = load_recipe(path, example_bench, steps)
    assert (recipe is None) == bool(problems)
