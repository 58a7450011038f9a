"""Mistakes that show themselves when values meet the bench: all at once, each with its place."""

from __future__ import annotations

import pytest

from benchrun.errors import FileProblemsError
from benchrun.schedule import build_schedule

from .made import KNOWN, changed_bench, example_bench, example_kit, recipe_from, schedule_from

READ = "  - read: {name: a}\n"
BASE = "  - set: {probe.level: 0 dBm, probe.frequency: 2.2 GHz}\n"


def problems(acquire: str, **more: object) -> list[str]:
    """Return the problems of an acquire part as LINE: message."""
    with pytest.raises(FileProblemsError) as caught:
        build_schedule(recipe_from(acquire), example_bench(), KNOWN, **more)  # type: ignore[arg-type]
    assert all(problem.file.endswith("test.recipe.yaml") and problem.column > 0 for problem in caught.value.problems)
    return [f"{problem.line}: {problem.message}" for problem in caught.value.problems]


def only(acquire: str, **more: object) -> str:
    """Return the one problem of an acquire part."""
    (found,) = problems(acquire, **more)
    return found


def test_a_value_outside_of_what_the_instrument_takes() -> None:
    assert only(BASE + "  - set: {pump.frequency: 7 GHz}\n" + READ) == (
        "7: pump.frequency would be 7 GHz; the bench file allows 10 MHz to 6 GHz (limits and ceiling). "
        "Change the recipe, or the bench file if the instrument can do it."
    )


def test_a_value_that_leaves_the_range_only_at_the_end_of_a_sweep() -> None:
    sweep = """
  - sweep: {frequency: {from: 5 GHz, to: 6.005 GHz, points: 1001}}
    do:
      - set: {pump.frequency: "{frequency} - 1 MHz"}
      - read: {name: a}
"""
    assert only(BASE + sweep).startswith("10: pump.frequency would be 6.004 GHz; the bench file allows")


def test_a_swept_quantity_outside_of_its_range() -> None:
    sweep = "  - sweep: {drain.voltage: [10 V, 31 V, 12 V]}\n    do: [{read: {name: a}}]\n"
    assert only(BASE + sweep).startswith("7: drain.voltage would be 31 V; the bench file allows 0 V to 30 V")


def test_a_level_above_the_ceiling() -> None:
    assert "allows -60 dBm to 5 dBm" in only(BASE + "  - set: {pump.level: 5.5 dBm}\n" + READ)


def test_all_mistakes_are_told_at_once_in_order() -> None:
    found = problems("""
  - set: {probe.level: 99 dBm}
  - set: {gate.voltage: 1 V}
  - read: {name: a, waves: [forward]}
  - connect: {plane: side, what: open}
""")
    assert [text.partition(":")[0] for text in found] == ["7", "8", "9", "10"]


@pytest.mark.parametrize(
    ("acquire", "says"),
    [
        (BASE + "  - read: {name: a, waves: [forward]}\n", "7: waves: there is no forward on this bench"),
        (BASE + "  - read: {name: a, tones: [pilot]}\n", "7: tones: there is no pilot on this bench"),
        (BASE + "  - read: {name: a, also: [drain.power]}\n", "7: also: nothing that can be read is called"),
        ("  - set: {probe.level: 0 dBm}\n" + READ, "7: probe.frequency has no value here"),
        ("  - set: {probe.frequency: 2 GHz}\n" + READ, "7: probe is on here, and probe.level was not set before"),
        (
            BASE + "  - set: {pump.frequency: 2.1 GHz}\n  - read: {name: a, tones: [probe, pump]}\n",
            "8: pump is on here, and pump.level (or drive) was not set before",
        ),
        (
            BASE + "  - settle: 1 s\n  - set: {pump.level: 0 dBm, pump.frequency: 2 GHz}\n"
            "  - read: {name: a, tones: [probe, pump]}\n",
            "7: pump is on here, and pump.level (or drive) was not set before",
        ),
        (BASE + "  - connect: {plane: side, what: open}\n" + READ, "7: there is no side plane on this bench"),
        (
            BASE + '  - set: {pump.level: "{probe.frequency}"}\n' + READ,
            "7: {probe.frequency} is a frequency, and pump.level is a level.",
        ),
        (BASE + '  - set: {pump.level: "{pump.level} + 1 dB"}\n' + READ, "7: {pump.level} has no value here"),
        (BASE + "  - set: {drive: 10 dBm, pump.level: 0 dBm}\n" + READ, "7: drive sets pump.level; set one of"),
        (
            BASE + "  - bring-up: {gate: -3 V, drain: 31 V}\n" + READ,
            "7: drain.voltage would be 31 V; the bench file allows 0 V to 30 V",
        ),
        (
            BASE + "  - bring-up: {gate: -1 V, drain: 9 V, quiescent: 1 A, within: 1 mA, gate-range: [-3 V, -2 V]}\n"
            "  - read: {name: a}\n",
            "7: gate: -1 V lies outside of gate-range",
        ),
        (
            "  - set: {probe.level: 0 dBm, pump.level: -9 dBm, probe.frequency: 20 MHz, pump.frequency: 12 MHz}\n"
            "  - read: {name: a, tones: [probe, pump, image]}\n",
            "7: receiver incident would be at 4 MHz; the bench file allows 10 MHz to 8 GHz.",
        ),
    ],
)
def test_what_the_bench_cannot_do(acquire: str, says: str) -> None:
    assert only(acquire).startswith(says)


@pytest.mark.parametrize(
    ("sweep", "inside", "says"),
    [
        ("drive: [10 dBm, 11 dBm]", "drive: 3 dBm", "9: drive is swept around this step, at line 7; it cannot"),
        ("drive: [10 dBm, 11 dBm]", "pump.level: 0 dBm", "9: drive is swept around this step, at line 7, and"),
        ("pump.level: [-10 dBm, -11 dBm]", "drive: 3 dBm", "9: pump.level is swept around this step, at line 7, and"),
        ("x: [1 dB, 2 dB]", 'probe.level: "{probe.level} + {x}"', "9: probe.level is set later in the same sweep"),
    ],
)
def test_sweeps_that_contradict_what_is_inside(sweep: str, inside: str, says: str) -> None:
    text = f"{BASE}  - sweep: {{{sweep}}}\n    do:\n      - set: {{{inside}}}\n      - read: {{name: a}}\n"
    assert only(text).startswith(says)


def test_what_is_set_before_it_is_referred_to_is_no_contradiction() -> None:
    schedule = schedule_from("""
  - sweep: {frequency: [2 GHz, 2.1 GHz]}
    do:
      - set: {probe.level: 0 dBm, probe.frequency: "{frequency}"}
      - set: {pump.frequency: "{probe.frequency} - 7 MHz", pump.level: -20 dBm}
      - read: {name: a, tones: [probe, pump]}
""")
    assert [schedule.reading(i).conditions["pump.frequency_hz"] for i in (0, 1)] == [1.993e9, 2.093e9]


def test_a_sweep_that_reads_nothing() -> None:
    assert only(BASE + "  - sweep: {drain.voltage: [1 V, 2 V]}\n    do: [{settle: 1 s}]\n" + READ).startswith(
        "7: the sweep of drain.voltage reads nothing"
    )


def test_one_name_for_two_kinds() -> None:
    sweep = "  - sweep: {{x: [{}]}}\n    do:\n      - set: {{{}}}\n      - read: {{name: a}}\n"
    text = BASE + sweep.format("1 GHz", 'probe.frequency: "{x}"') + sweep.format("1 dBm", 'probe.level: "{x}"')
    assert "11: 'x' is a frequency elsewhere in this recipe; give this one another name." in problems(text)


def test_what_the_kit_does_not_hold() -> None:
    acquire = """
  - set: {probe.level: 0 dBm, probe.frequency: 2.2 GHz}
  - sweep: {standard: [open, sliding-match]}
    do:
      - connect: {plane: output, what: "{standard}"}
      - read: {name: a}
"""
    found = only(acquire, kit=example_kit())
    assert found.startswith("10: nothing called 'sliding-match' can be connected; there is device, meter, open, short")
    assert len(schedule_from(acquire)) == 2


def test_a_drive_where_a_parts_table_ends_names_the_bench_file() -> None:
    bench = changed_bench(("gain: 30 dB, linear", "gain: [[2.2 GHz, 30 dB], [2.3 GHz, 31 dB]], linear"))
    acquire = """
  - set: {drive: 10 dBm, pump.frequency: 2.4 GHz}
  - read: {name: a, waves: [], tones: [pump]}
"""
    with pytest.raises(FileProblemsError, match=r"test\.bench\.yaml: part 'booster': the table runs from 2\.2 GHz"):
        schedule_from(acquire, bench)
