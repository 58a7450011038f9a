"""What goes into an archive comes out of it, to the last bit; the digest sees all of it and nothing else."""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.archive import ArchiveReader, ArchiveWriter, Event, Meta, open_archive
from benchrun.contract.reading import Reading
from benchrun.errors import DataSetError
from tests.archive.readings import META, reading, readings, same


@contextmanager
def archived(committed: list[Reading], meta: Meta = META) -> Iterator[ArchiveReader]:
    """Commit readings to a new archive, close it, and open it again."""
    with tempfile.TemporaryDirectory() as name:
        writer = ArchiveWriter.create(Path(name), meta)
        for one in committed:
            writer.commit(one)
        writer.close("complete")
        with open_archive(Path(name)) as reader:
            yield reader


def key(one: Reading) -> tuple[int, str, int]:
    return one.index, one.name, one.attempt


@settings(max_examples=60, deadline=None)
@given(st.lists(readings(), max_size=4, unique_by=key))
def test_every_reading_comes_back(committed: list[Reading]) -> None:
    with archived(committed, replace(META, readings_planned=2**40 + 1)) as reader:
        found = list(reader.readings(every_attempt=True))
        assert reader.check() == []
        assert reader.count_all == len(committed)
    in_order = sorted(committed, key=lambda one: (one.index, one.name.encode(), one.attempt))
    assert all(same(one, other) for one, other in zip(found, in_order, strict=True))


def test_meta_comes_back() -> None:
    with archived([]) as reader:
        found = reader.meta
    assert replace(found, started_utc="", ended_utc="", state="running") == META
    assert found.state == "complete"
    assert found.started_utc <= found.ended_utc


def test_the_last_attempt_is_final() -> None:
    first, second, other = reading(3), reading(3, attempt=1, flags=("again",)), reading(3, name="cold")
    with archived([first, second, other, reading(1)]) as reader:
        assert [key(one) for one in reader.readings()] == [(1, "hot", 0), (3, "cold", 0), (3, "hot", 1)]
        assert [key(one) for one in reader.readings("hot")] == [(1, "hot", 0), (3, "hot", 1)]
        assert [key(one) for one in reader.readings("hot", every_attempt=True)] == [
            (1, "hot", 0),
            (3, "hot", 0),
            (3, "hot", 1),
        ]
        assert (reader.count, reader.count_all) == (3, 4)
        assert reader.names == ("hot", "cold")


def test_the_schedules_order_whatever_the_order_of_committing() -> None:
    with archived([reading(k) for k in (5, 2, 9, 0)]) as reader:
        assert [one.index for one in reader.readings()] == [0, 2, 5, 9]


# Stack


def test_a_stack_holds_the_same_as_the_readings() -> None:
    committed = [reading(k) for k in range(50)] + [
        reading(7, attempt=1),
        reading(99, name="other", tones=(), offsets_hz=(), data=np.empty((0, 2, 1))),
    ]
    with archived(committed) as reader:
        stack, one_by_one = reader.stack("hot"), list(reader.readings("hot"))
    assert stack.data.shape == (50, 3, 2, 1)
    assert stack.data.dtype == np.complex128
    assert np.array_equal(stack.data, np.array([one.data for one in one_by_one]))
    assert stack.index.tolist() == [one.index for one in one_by_one]
    assert stack.frequencies_hz.tolist() == [list(one.frequencies_hz) for one in one_by_one]
    assert stack.conditions["drive_dbm"].tolist() == [one.conditions["drive_dbm"] for one in one_by_one]
    assert stack.conditions["connected.output"].tolist() == ["device"] * 50
    assert stack.scalars["drain.current_a"].tolist() == [one.scalars["drain.current_a"] for one in one_by_one]
    assert stack.started_ns.tolist() == [one.started_ns for one in one_by_one]
    assert (stack.tones, stack.waves, stack.offsets_hz, stack.coherent) == (
        ("probe", "pump", "image"), ("incident", "reflected"), (0.0, -7e6, -14e6), True,
    )  # fmt: skip


def test_what_a_reading_lacks_is_nan_or_no_word() -> None:
    bare = reading(1, conditions={}, scalars={})
    with archived([reading(0, flags=("over-limit:reflected",)), bare]) as reader:
        stack = reader.stack("hot")
    assert np.isnan(stack.conditions["drive_dbm"][1])
    assert np.isnan(stack.scalars["drain.voltage_v"][1])
    assert stack.conditions["connected.output"].tolist() == ["device", ""]
    assert stack.flags == (("over-limit:reflected",), ())


def test_scalars_only_stack_too() -> None:
    bare = {"frequencies_hz": (), "tones": (), "offsets_hz": (), "waves": (), "data": np.empty((0, 0, 0), complex)}
    with archived([reading(k, **bare) for k in range(3)]) as reader:
        stack = reader.stack("hot")
    assert stack.data.shape == (3, 0, 0, 0)
    assert stack.frequencies_hz.shape == (3, 0)


def test_what_does_not_stack_is_refused() -> None:
    with archived([reading(0), reading(1, tones=("a", "b", "c")), reading(2, name="cold")]) as reader:
        with pytest.raises(DataSetError, match="differ in tones"):
            reader.stack("hot")
        with pytest.raises(DataSetError, match="no reading called 'warm'"):
            reader.stack("warm")
        assert len(reader.stack("cold").index) == 1


# Digest

CHANGES: dict[str, dict[str, Any]] = {
    "a condition": {"conditions": {"drive_dbm": 14.000000000000002}},
    "a condition's name": {"conditions": {"drive_dbw": 14.0}},
    "a word": {"conditions": {"drive_dbm": 14.0, "connected.output": "open"}},
    "a flag": {"flags": ("over-limit:incident",)},
    "a scalar": {"scalars": {"drain.current_a": 1.3}},
    "a wave": {"data": reading().data * (1 + 1e-15)},
    "a frequency": {"frequencies_hz": (2.2e9 + 1e-6,)},
    "an offset": {"offsets_hz": (0.0, -7e6, -14000001.0)},
    "a tone's name": {"tones": ("probe", "pump", "mirror")},
    "coherence": {"coherent": False},
    "the start": {"started_ns": 1},
    "the end": {"ended_ns": 61_000_000},
}


def digest(*committed: Reading) -> str:
    with archived(list(committed)) as reader:
        return reader.digest()


@pytest.mark.parametrize("what", CHANGES)
def test_the_digest_sees(what: str) -> None:
    base = reading(conditions={"drive_dbm": 14.0})
    assert digest(base, reading(1)) != digest(replace(base, **CHANGES[what]), reading(1))


def test_the_digest_does_not_see_what_may_differ() -> None:
    base = digest(reading(0), reading(1))
    turned = dict(reversed(list(reading(0).conditions.items())))
    assert digest(reading(1), reading(0)) == base
    assert digest(reading(0, conditions=turned), reading(1)) == base
    assert digest(reading(0, started_utc="1999-12-31T23:59:59+00:00"), reading(1)) == base
    assert digest(reading(0, flags=("bad",)), reading(0, attempt=1), reading(1)) == base
    assert digest(reading(0)) != base


def test_the_digest_does_not_see_meta_events_and_products() -> None:
    with tempfile.TemporaryDirectory() as name:
        writer = ArchiveWriter.create(Path(name), replace(META, title="Another"))
        writer.log(Event("note", "hello"))
        writer.product("calibration", "output-plane", {})
        writer.commit(reading())
        writer.close("failed")
        with open_archive(Path(name)) as reader:
            assert reader.digest() == digest(reading())


# What contradicts itself is a defect of ours


@pytest.mark.parametrize(
    "changes",
    [
        {"data": np.zeros((3, 2, 2), complex)},
        {"tones": ("probe",)},
        {"waves": ()},
        {"frequencies_hz": ()},
        {"offsets_hz": (0.0,)},
        {"conditions": {"drive_dbm": float("nan")}},
        {"conditions": {"drive_dbm": float("inf")}},
    ],
)
def test_a_reading_that_contradicts_itself_is_not_taken(changes: dict[str, Any], tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer:
        with pytest.raises(ValueError):
            writer.commit(reading(**changes))
        writer.commit(reading())
        assert writer.readings == 1


def test_numpys_numbers_are_numbers() -> None:
    conditions = {"drive_dbm": np.float64(14.5), "n": np.int64(3)}
    with archived([reading(conditions=conditions, scalars={"x": np.float32(0.5)})]) as reader:
        (found,) = reader.readings()
    assert found.conditions == {"drive_dbm": 14.5, "n": 3}
    assert found.scalars == {"x": 0.5}
