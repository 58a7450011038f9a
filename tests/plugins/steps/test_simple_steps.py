"""set, settle, ask, connect: models and what they expand to."""

from __future__ import annotations

import pytest
from benchrun_plugins.steps import STEPS, ask, connect, set_values, settle
from pydantic import ValidationError

from benchrun.contract.actions import AskAction, SetAction, SettleAction

from .stand_ins import Scope


def test_set_keeps_the_order_that_was_written() -> None:
    model = set_values.SetModel.model_validate({"probe.frequency": "2.3 GHz", "probe.level": "8 dBm"})
    (action,) = set_values.expand(model, Scope())
    assert action == SetAction((("probe.frequency", 2.3e9), ("probe.level", 8.0)))


@pytest.mark.parametrize("given", [{}, {"probe level": "8 dBm"}, {"probe.level": None}, {"probe.level": True}, "8 dBm"])
def test_set_refuses(given: object) -> None:
    with pytest.raises(ValidationError):
        set_values.SetModel.model_validate(given)


def test_settle_has_the_signals_of_the_next_reading_on() -> None:
    model = settle.SettleModel.model_validate("20 ms")
    (action,) = settle.expand(model, Scope(following=("pump", "probe")))
    assert action == SettleAction(0.02, ("pump", "probe"))


@pytest.mark.parametrize("given", ["20", 20, "20 mm", "-1 ms", {"time": "20 ms"}])
def test_settle_refuses(given: object) -> None:
    with pytest.raises(ValidationError):
        settle.SettleModel.model_validate(given)


def test_connect_says_what_where_and_with_what_care() -> None:
    model = connect.ConnectModel.model_validate(
        {"plane": "output", "what": "{standard}", "note": "right-hand side of the coupler"}
    )
    (action,) = connect.expand(model, Scope(words={"standard": "open"}))
    assert isinstance(action, AskAction)
    assert action.text == "Connect OPEN to the output plane (right-hand side of the coupler)."
    assert action.connect == ("output", "open")
    assert any("torque" in caution for caution in action.cautions)
    assert any("RF and drain" in caution for caution in action.cautions)


@pytest.mark.parametrize(
    "given",
    [{"plane": "output"}, {"plane": "output", "what": "{a} {b}"}, {"plane": "out put", "what": "open"},
     {"plane": "output", "what": "open", "whom": "x"}],
)  # fmt: skip
def test_connect_refuses(given: object) -> None:
    with pytest.raises(ValidationError):
        connect.ConnectModel.model_validate(given)


def test_ask_warns_before_anybody_touches_anything() -> None:
    (action,) = ask.expand(ask.AskModel(text="Switch the fan on."), Scope())
    assert isinstance(action, AskAction)
    assert action.text == "Switch the fan on."
    assert action.connect is None
    assert "off" in action.cautions[0]


def test_every_step_has_a_key_of_its_own_and_describes_itself() -> None:
    assert sorted(step.key for step in STEPS) == ["ask", "bring-up", "connect", "read", "set", "settle"]
    for step in STEPS:
        assert step.help
        assert step.model.model_json_schema(by_alias=True)["description"]
