"""`settle`: wait, with the RF of the next reading on."""

from __future__ import annotations

from collections.abc import Iterator

from pydantic import ConfigDict, RootModel

from benchrun.contract.actions import Action, SettleAction
from benchrun.contract.hooks import StepScope, StepSpec

from .quantity import Wait


class SettleModel(RootModel[Wait]):
    """How long to wait: 20 ms."""

    model_config = ConfigDict(frozen=True)


def expand(model: SettleModel, scope: StepScope) -> Iterator[Action]:
    """Yield one SettleAction with the signals of the next reading in the same list on, so that it settles under RF."""
    yield SettleAction(model.root, scope.following_read())


SPEC = StepSpec(
    key="settle",
    model=SettleModel,
    help="Let time pass with the signals of the next reading on: 20 ms.",
    expand=expand,
)
