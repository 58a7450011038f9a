"""The built-in steps: what a recipe's `acquire` part is made of, one file each."""

from __future__ import annotations

from benchrun.contract.hooks import StepSpec

from . import ask, bring_up, connect, read, set_values, settle

STEPS: tuple[StepSpec, ...] = (ask.SPEC, bring_up.SPEC, connect.SPEC, read.SPEC, set_values.SPEC, settle.SPEC)
