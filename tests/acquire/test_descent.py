"""The order of the safe state, whatever is confirmed and whatever is not."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.acquire.descent import WITNESS, Descent, Kind, Step


@st.composite
def benches(draw: st.DrawFn) -> tuple[list[str], list[str], list[str]]:
    counts = [draw(st.integers(0, 3)) for _ in range(3)]
    return tuple(
        [f"{word}{n}" for n in range(count)] for word, count in zip(("source", "drain", "gate"), counts, strict=True)
    )  # type: ignore[return-value]


def go_down(
    bench: tuple[list[str], list[str], list[str]], answers: st.DataObject
) -> tuple[Descent, list[tuple[Step, bool]]]:
    descent, done = Descent(*bench), []
    while step := descent.next():
        confirmed = answers.draw(st.booleans())
        done.append((step, confirmed))
        descent.report(step, confirmed=confirmed)
    return descent, done


@given(benches(), st.data())
def test_a_gate_is_never_released_before_everything_else_is_confirmed(
    bench: tuple[list[str], list[str], list[str]], answers: st.DataObject
) -> None:
    descent, done = go_down(bench, answers)
    for n, (step, _) in enumerate(done):
        if step.kind is Kind.GATE:
            confirmed = {one for one, well in done[:n] if well}
            assert confirmed >= {Step(Kind.SOURCE, name) for name in bench[0]} | {
                Step(Kind.DRAIN, name) for name in bench[1]
            } | {WITNESS}
    touched = {step.name for step, _ in done if step.kind is Kind.GATE}
    assert touched | set(descent.untouched) == set(bench[2])


@given(benches(), st.data())
def test_everything_is_tried_and_nothing_is_forgotten(
    bench: tuple[list[str], list[str], list[str]], answers: st.DataObject
) -> None:
    descent, done = go_down(bench, answers)
    tried = [step for step, _ in done]
    before_gates = (
        {Step(Kind.SOURCE, name) for name in bench[0]} | {Step(Kind.DRAIN, name) for name in bench[1]} | {WITNESS}
    )
    assert before_gates <= set(tried)
    for step in before_gates:
        outcomes = [well for one, well in done if one == step]
        assert outcomes in ([True], [False, True], [False, False])
        assert (step in descent.confirmed) == outcomes[-1]
        assert (step in descent.unconfirmed) != outcomes[-1]


@given(benches(), st.data())
def test_first_tries_come_in_order(bench: tuple[list[str], list[str], list[str]], answers: st.DataObject) -> None:
    _, done = go_down(bench, answers)
    first = list(dict.fromkeys(step for step, _ in done))
    order = [Kind.SOURCE, Kind.WITNESS, Kind.DRAIN, Kind.GATE]
    assert [step.kind for step in first] == sorted((step.kind for step in first), key=order.index)


def test_a_step_out_of_turn_is_a_defect() -> None:
    descent = Descent(["pump"], ["drain"], ["gate"])
    with pytest.raises(RuntimeError, match="gate"):
        descent.report(Step(Kind.GATE, "gate"), confirmed=True)
