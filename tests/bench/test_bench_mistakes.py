"""Mistakes in a bench file: each told at its place, with what was expected and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from benchrun.bench import load_bench

Told = Callable[..., list[str]]


def test_the_small_bench_is_right(told: Told) -> None:
    assert told() == []


@pytest.mark.parametrize(
    ("old", "new", "at", "message"),
    [
        (
            "ceiling: 5 dBm",
            "celing: 5 dBm",
            "celing",
            "'celing' is not known here. Did you mean 'ceiling'?",
        ),
        (
            "ceiling: 5 dBm",
            "ceiling: 3,5 dBm",
            "3",
            "'3,5 dBm' is not a quantity: the decimal mark is a point. Did you mean 3.5 dBm?",
        ),
        (
            "ceiling: 5 dBm",
            "ceiling: 10 min",
            "10 min",
            "'10 min' is a time, where a level is expected, like -10 dBm.",
        ),
        (
            "ceiling: 5 dBm",
            "ceiling: 5",
            "5",
            "'5' has no unit: a level is written with one, like -10 dBm.",
        ),
        (
            "released-below: 1 V",
            "released-below: 27 V",
            "27 V",
            "at 27 V this bias is not off, and the gate would be released: it must be 3 V or less, "
            "a tenth of its range.",
        ),
        (
            "input-match: -22 dB",
            "input-match: 22 dB",
            "22 dB",
            "'22 dB' must be below 0.",
        ),
        (
            "output-match: -22 dB",
            "output-match: 0 dB",
            "0 dB",
            "'0 dB' must be below 0.",
        ),
        (
            "ramp: 3 dB",
            "ramp: -3 dB",
            "-3 dB",
            "'-3 dB' must be above 0.",
        ),
        (
            "8 GHz]",
            "8 Ghz]",
            "8 Ghz",
            "'8 Ghz': the unit is written GHz. Did you mean 8 GHz?",
        ),
        (
            "8 GHz]",
            "1e999 Hz]",
            "1e999 Hz",
            "'1e999 Hz' is beyond any number that can be carried; check the exponent.",
        ),
        (
            "[10 MHz, 8 GHz]",
            "[8 GHz, 10 MHz]",
            "[8 GHz",
            "a range is written [lowest, highest]; these two do not rise.",
        ),
        (
            "TCPIP0::192.0.2.1::INSTR",
            "my pump",
            "my pump",
            "'my pump' is not a VISA resource string.",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pda, loss: 20 dB",
            "pda",
            "'pda' is not known here; expected: pad, cable, adapter, filter, isolator, coupler, amplifier. "
            "Did you mean 'pad'?",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pad, loss: -20 dB",
            "-20 dB",
            "a loss is written without a sign: -20 dB would be a gain.",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pad",
            "P3",
            "'loss' is missing here.",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pad, loss: {file: none.s2p}",
            "{file",
            "there is no file 'none.s2p' beside this one.",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pad, loss: {file: ../x.s2p}",
            "{file",
            "'../x.s2p' is not the name of a file beside this one.",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pad, loss: [[2 GHz, 20 dB]]",
            "[[2 GHz",
            "a table has two rows or more of a frequency and a ratio: [[2.2 GHz, 10.1 dB], [2.4 GHz, 10.2 dB]].",
        ),
        (
            "kind: pad, loss: 20 dB",
            "kind: pad, loss: [[2 GHz, 20 dB], [2 GHz, 20 dB]]",
            "[[2 GHz",
            "the frequencies of a table must rise from row to row.",
        ),
        (
            "reflection: 0.6",
            "reflection: 1.6",
            "1.6",
            "'1.6' must be at most 1.",
        ),
        (
            "path: [P2, coupler]",
            "path: [P9, coupler]",
            "P9",
            "the bench has no part called 'P9'. It has booster, coupler, P1, P2, P3.",
        ),
        (
            "path: [P2, coupler]",
            "path: [nothing, coupler]",
            "nothing",
            "the bench has no part called 'nothing'. It has booster, coupler, P1, P2, P3.",
        ),
        (
            "path: [P2, coupler]",
            "path: [P1, coupler]",
            "P1",
            "'P1' stands on the way of 'probe' already; one part is in one place.",
        ),
        (
            "{instrument: pump, path: [booster], plane: input}",
            "{instrument: pmup, path: [booster], plane: input}",
            "pmup",
            "the bench has no instrument called 'pmup'. Did you mean 'pump'?",
        ),
        (
            "{instrument: pump, path: [booster], plane: input}",
            "{instrument: pump, path: [booster], plane: output}",
            "output",
            "'pump' goes to the output plane already; one signal to one plane.",
        ),
        (
            "{instrument: pump, path: [booster], plane: input}",
            "{instrument: meter, path: [booster], plane: input}",
            "meter",
            "'meter' is a power-meter; signals come from a signal-source or a wave-receiver.",
        ),
        (
            "{instrument: pump, path: [booster], plane: input}",
            "{instrument: analyser, path: [booster], plane: input}",
            "analyser",
            "'analyser' gives 'pump' already; one signal from one instrument.",
        ),
        (
            ", ceiling: 5 dBm, ramp: 3 dB",
            "",
            "pump",
            "'pump' needs 'ceiling': the highest level that is ever sent to it. Without one no level is sent.",
        ),
        (
            "    source-port: {number: 2, damage: 26 dBm, power-up: -10 dBm}\n",
            "",
            "analyser",
            "'analyser' gives a signal and needs 'source-port': its number, what it bears, and its level at power-up.",
        ),
        (
            "receiver: R4, coupler: coupler",
            "receiver: R4, coupler: cuopler",
            "cuopler",
            "the bench has no coupler called 'cuopler'. Did you mean 'coupler'?",
        ),
        (
            "receiver: R4, coupler: coupler",
            "receiver: R4, coupler: P1",
            "P1",
            "'P1' is a pad, not a coupler. The bench has coupler.",
        ),
        (
            "path: [P2, coupler]",
            "path: [P2]",
            "coupler",
            "no signal passes 'coupler': put it on the path of the signal that it stands in.",
        ),
        (
            "{instrument: analyser, receiver: R4",
            "{instrument: pump, receiver: R4",
            "pump",
            "'pump' is a signal-source; receivers come from a wave-receiver.",
        ),
        (
            "receiver: R4",
            "receiver: R3",
            "R3",
            "analyser R3 is 'incident' already.",
        ),
        (
            "arm: reflected",
            "arm: incident",
            "incident",
            "the incident arm of coupler is 'incident' already.",
        ),
        (
            "channel: 2",
            "channel: 1",
            "1",
            "channel 1 of 'supply' is 'gate' already.",
        ),
        (
            "drain: {instrument: supply",
            "drain: {instrument: meter",
            "meter",
            "'meter' is a power-meter; bias voltages come from a dc-supply.",
        ),
        (
            "over-voltage: 32 V",
            "over-voltage: 20 V",
            "20 V",
            "the over-voltage trip would trip inside the range: it must be 30 V or more.",
        ),
        (
            ", pinch-off: -5 V",
            "",
            "gate",
            "'gate' needs 'pinch-off': the safe state depends on it.",
        ),
        (
            "pinch-off: -5 V",
            "pinch-off: -8 V",
            "-8 V",
            "pinch-off lies outside the voltage range of this bias.",
        ),
        (
            ",\n    released-below: 1 V",
            "",
            "drain",
            "'drain' needs 'released-below': the safe state depends on it.",
        ),
        (
            "  supply: {driver: dc-supply",
            "  supply: {driver: dc-supply, tones: coherent",
            "tones",
            "'tones' belongs to a wave-receiver; 'supply' is a dc-supply.",
        ),
        (
            "    sensor: {linear: 33 dBm, damage: 36 dBm, reflection: 0.02, uncertainty: 0.065 dB}\n",
            "",
            "meter",
            "'meter' needs 'sensor': what its sensor bears and reflects.",
        ),
        (
            "ceiling: 5 dBm",
            "dialect: x.dialect.yaml, ceiling: 5 dBm",
            "x.dialect.yaml",
            "there is no file 'x.dialect.yaml'; names are taken from the folder of this file.",
        ),
        (
            "title: Small bench",
            "title: Small bench\nrehearsal-channel: 127.0.0.1:5000",
            "rehearsal-channel",
            "only a bench with `simulated: true` has a rehearsal channel.",
        ),
        (
            "title: Small bench",
            "title: Small bench\nvisa: {backend: /usr/lib/libvisa.so}",
            "/usr/lib/libvisa.so",
            "'/usr/lib/libvisa.so' is not the name of a VISA backend, such as py.",
        ),
        (
            "title: Small bench",
            "title: Small bench\nrehearsal: {nose: false}",
            "nose",
            "'nose' is not known here. Did you mean 'noise'?",
        ),
        (
            "benchrun: 1",
            "benchrun: 2",
            "2",
            "'2' is not known here; expected: 1.",
        ),
    ],
)
def test_a_mistake_is_told_at_its_place(told: Told, old: str, new: str, at: str, message: str) -> None:
    first, *_ = told(old, new)
    file, line, column, said = first.split(":", 3)
    assert (file, said) == ("b.bench.yaml", f" {message}")
    assert Path(file).read_text("utf-8").splitlines()[int(line) - 1][int(column) - 1 :].startswith(at)


def test_names_that_would_be_the_same_full_name_are_told(told: Told) -> None:
    assert told("  meter:\n", "  gate:\n") == ["b.bench.yaml:13:3: 'gate' is a name in bias already; choose another."]
    assert told("  ambient: {", "  drive: {") == [
        "b.bench.yaml:18:3: 'drive' is the power at the device's input; choose another name."
    ]


def test_drivers_that_are_not_installed_are_told_where_it_is_known_which_are(told: Told) -> None:
    change = ("driver: signal-source", "driver: signal-sorce")
    roles = {name: name for name in ("signal-source", "wave-receiver", "power-meter", "dc-supply", "thermometer")}
    assert told(*change) == []
    assert told(*change, roles=roles) == [
        "b.bench.yaml:4:18: no installed driver is called 'signal-sorce'. Did you mean 'signal-source'? "
        "Installed: signal-source, wave-receiver, power-meter, dc-supply, thermometer."
    ]


def test_all_mistakes_come_at_once(told: Told) -> None:
    messages = told("gain: 14.5 dB", "gain: 14,5 dB", "linear: -3 dBm", "linar: -3 dBm", "channel: 2", "channel: two")
    assert [message.split(":")[1] for message in messages] == ["12", "12", "33", "36"]


def test_a_missing_file_is_told(tmp_path: Path) -> None:
    bench, problems = load_bench(tmp_path / "none.bench.yaml")
    assert bench is None
    expected = f"{tmp_path / 'none.bench.yaml'}: there is no such file. Check the name and the folder."
    assert [str(problem) for problem in problems] == [expected]


@given(line=st.integers(0, 42), text=st.text("abc:{}[]-,# 1.\"'", max_size=20))
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow], max_examples=60)
def test_any_spoilt_line_is_a_bench_or_told(tmp_path: Path, recipes: Path, line: int, text: str) -> None:
    lines = (recipes / "balloon-driver.bench.yaml").read_text("utf-8").split("\n")
    lines[(line * 2) % len(lines)] = text
    path = tmp_path / "spoilt.bench.yaml"
    path.write_text("\n".join(lines), "utf-8")
    bench, problems = load_bench(path)
    assert (bench is None) == bool(problems)
