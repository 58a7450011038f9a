"""How far the tool is from the truth in world R1: the short form of tests/benchmarks/truth.py with its 20 seeds."""

from __future__ import annotations

import numpy as np
import pytest

from tests.benchmarks.truth import LESS_LEVEL, MOST_CONVERSION, MOST_REFLECTION, of_seed
from tests.flow.stage import SMALL

#: Every second drive and 27 of 81 frequencies, and calibrations on the demo's own grids.
FEWER = (("points: 81", "points: 27"), ("step: 1 dB}}      # power", "step: 2 dB}}      # power"))


@pytest.mark.parametrize("seed", [1, 2])
def test_reflection_and_conversion_are_near_the_truth_where_tones_are_coherent(seed: int) -> None:
    found = of_seed(seed, True, FEWER)
    assert found.reflection.size == 9 * 27
    reflection, conversion = found.percentile()
    assert reflection <= MOST_REFLECTION
    assert conversion <= MOST_CONVERSION


def test_reflection_and_the_size_of_conversion_are_near_the_truth_where_receivers_are_retuned() -> None:
    reflection, conversion = of_seed(1, False, (*FEWER, *LESS_LEVEL)).percentile()
    assert reflection <= MOST_REFLECTION
    assert conversion <= MOST_CONVERSION


PERFECT = ("noise", "drift", "definitions", "repeatability", "crosstalk", "skirt", "meter-error", "second-order")


def test_on_a_bench_without_imperfections_nothing_is_left_but_interpolation() -> None:
    """What is left with everything off is the tool's own error, and must be far below what imperfections bring."""
    rehearsal = "rehearsal: {world: R1, kit: field-kit.kit.yaml"
    off = (rehearsal, rehearsal + "".join(f", {name}: false" for name in PERFECT))
    found = of_seed(1, True, (*SMALL, off))
    assert np.max(found.reflection) < 0.0005
    assert np.max(found.conversion) < 0.0005
