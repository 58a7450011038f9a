"""`ask`: have the operator do something; RF and drain are off."""

from __future__ import annotations

from collections.abc import Iterator

from pydantic import Field

from benchrun.contract.actions import Action, AskAction
from benchrun.contract.hooks import StepScope, StepSpec
from benchrun.yaml_source import Strict

#: RF burns, and a hot load or a charged bias line looks like any other.
CAUTION = "Touch nothing before RF and drain have been read back as off."


class AskModel(Strict):
    """What the operator is asked to do."""

    text: str = Field(min_length=1, description="What to do, in whole sentences.")


def expand(model: AskModel, scope: StepScope) -> Iterator[Action]:
    """Yield one AskAction."""
    yield AskAction(scope.text(model.text), (CAUTION,))


SPEC = StepSpec(
    key="ask",
    model=AskModel,
    help="Ask the operator to do something, with RF and drain off: {text: Switch the fan on.}.",
    expand=expand,
)
