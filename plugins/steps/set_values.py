"""`set`: quantities of the bench, by full name."""

from __future__ import annotations

from collections.abc import Iterator

from pydantic import ConfigDict, Field, RootModel

from benchrun.contract.actions import Action, SetAction
from benchrun.contract.hooks import StepScope, StepSpec

from .quantity import AnyQuantity, FullName


class SetModel(RootModel[dict[FullName, AnyQuantity]]):
    """Full names to quantities, or to sums of references and quantities: {pump.frequency: "{frequency} - 7 MHz"}."""

    model_config = ConfigDict(frozen=True)
    root: dict[FullName, AnyQuantity] = Field(min_length=1)


def expand(model: SetModel, scope: StepScope) -> Iterator[Action]:
    """Yield one SetAction with every quantity, in the order written. Raises InputError for a bad value."""
    yield SetAction(tuple((target, scope.value(text, target)) for target, text in model.root.items()))


SPEC = StepSpec(
    key="set",
    model=SetModel,
    help='Set quantities: {probe.frequency: "{frequency}", pump.frequency: "{frequency} - 7 MHz"}.',
    expand=expand,
)
