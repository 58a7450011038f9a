"""`connect`: have the operator connect a standard, a meter or the device to a plane; RF and drain are off."""

from __future__ import annotations

from collections.abc import Iterator

from pydantic import Field

from benchrun.contract.actions import Action, AskAction
from benchrun.contract.hooks import StepScope, StepSpec
from benchrun.yaml_source import Strict

from .ask import CAUTION
from .quantity import Name

CARE = "Clean, gauge, torque to the connector's value."


class ConnectModel(Strict):
    """What is connected where."""

    plane: Name = Field(description="The plane: where a signal's path ends, such as output.")
    what: str = Field(
        pattern=r"^(\{[a-z][a-z0-9-]*\}|[A-Za-z][A-Za-z0-9-]*)$",
        description="A standard of the kit, a power meter of the bench, or device; a reference to a swept word.",
        examples=["open", "{standard}"],
    )
    note: str | None = Field(None, description="Where on the bench that is, for the operator.")


def expand(model: ConnectModel, scope: StepScope) -> Iterator[Action]:
    """Yield one AskAction that says what to connect."""
    what = scope.text(model.what)
    note = f" ({model.note.rstrip('.')})" if model.note else ""
    text = f"Connect {what.upper()} to the {model.plane} plane{note}."
    yield AskAction(text, (CARE, CAUTION), (model.plane, what))


SPEC = StepSpec(
    key="connect",
    model=ConnectModel,
    help="Ask the operator to connect something to a plane: {plane: output, what: open}.",
    expand=expand,
)
