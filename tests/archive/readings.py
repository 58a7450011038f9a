"""Readings to put into archives: one by hand, and any that hypothesis can think of."""

from __future__ import annotations

from typing import Any

import numpy as np
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from benchrun.archive import Meta
from benchrun.contract.reading import Reading

META = Meta(
    run_id="run-1",
    title="Hot output match",
    recipe="hot.recipe.yaml",
    bench="balloon.bench.yaml",
    files={"hot.recipe.yaml": "benchrun: 1\n", "balloon.bench.yaml": "benchrun: 1  # µ, Ω\n"},
    schedule_hash="0" * 64,
    readings_planned=1000,
    origin="simulated:1",
    seed=1,
    device={"part": "HD-31", "serial": "0042"},
    versions={"benchrun": "0.1.0"},
    identities={
        "pump": {
            "maker": "Invented",
            "model": "G1",
            "serial": "7",
            "firmware": "1.0",
            "options": "",
            "reference_locked": True,
        }
    },
    operator="somebody",
    cal_due={"meter": "2027-03-01"},
)


def reading(index: int = 0, name: str = "hot", attempt: int = 0, **changes: Any) -> Reading:
    """Return a reading of three tones and two waves at one point, its data depending on its index."""
    given = {
        "conditions": {
            "drive_dbm": 14.0 + index % 17,
            "frequency_hz": 2.2e9 + 2.5e6 * index,
            "connected.output": "device",
        },
        "frequencies_hz": (2.2e9 + 2.5e6 * index,),
        "tones": ("probe", "pump", "image"),
        "offsets_hz": (0.0, -7e6, -14e6),
        "waves": ("incident", "reflected"),
        "data": np.random.default_rng(index).normal(size=(3, 2, 1, 2)).view(np.complex128)[..., 0],
        "coherent": True,
        "scalars": {"drain.current_a": 1.2 + index / 7, "drain.voltage_v": 28.0},
        "started_ns": index * 1_000_000_007,
        "ended_ns": index * 1_000_000_007 + 60_000_000,
        "started_utc": "2026-12-01T21:14:02.123+00:00",
    }
    return Reading(index=index, name=name, attempt=attempt, **{**given, **changes})


words = st.text(st.characters(exclude_categories=("Cs",)), max_size=12)
finite = st.floats(allow_nan=False, allow_infinity=False)
numbers = st.floats(allow_nan=True, allow_infinity=True)
nanoseconds = st.integers(0, 2**63 - 1)


@st.composite
def readings(draw: st.DrawFn, indices: st.SearchStrategy[int] | None = None) -> Reading:
    """Any reading that does not contradict itself."""
    shape = tuple(draw(st.integers(0, 3)) for _ in range(3))
    tones, waves, points = shape
    complex_numbers = st.complex_numbers(allow_nan=True, allow_infinity=True)
    return Reading(
        index=draw(indices or st.integers(0, 2**40)),
        name=draw(words),
        attempt=draw(st.integers(0, 5)),
        conditions=draw(st.dictionaries(words, st.one_of(finite, words), max_size=5)),
        frequencies_hz=tuple(draw(st.lists(numbers, min_size=points, max_size=points))),
        tones=tuple(draw(st.lists(words, min_size=tones, max_size=tones))),
        offsets_hz=tuple(draw(st.lists(finite, min_size=tones, max_size=tones))),
        waves=tuple(draw(st.lists(words, min_size=waves, max_size=waves))),
        data=draw(hnp.arrays(np.complex128, shape, elements=complex_numbers)),
        coherent=draw(st.booleans()),
        scalars=draw(st.dictionaries(words, numbers, max_size=4)),
        flags=tuple(draw(st.lists(words, max_size=3))),
        started_ns=draw(nanoseconds),
        ended_ns=draw(nanoseconds),
        started_utc=draw(words),
    )


def same(one: Reading, other: Reading) -> bool:
    """Whether two readings are the same to the last bit (NaN equals NaN)."""

    def plain(reading: Reading) -> tuple[Any, ...]:
        return (
            reading.index, reading.name, reading.attempt, dict(reading.conditions), repr(reading.frequencies_hz),
            reading.tones, reading.offsets_hz, reading.waves, reading.data.shape, reading.data.tobytes(),
            reading.coherent, repr(sorted(reading.scalars.items())), reading.flags,
            reading.started_ns, reading.ended_ns, reading.started_utc,
        )  # fmt: skip

    return plain(one) == plain(other)
