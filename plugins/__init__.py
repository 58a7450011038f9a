"""The built-in drivers and steps, found through the same entry point group as anyone's."""

from __future__ import annotations

from collections.abc import Sequence

from benchrun.contract.hooks import DriverSpec, StepSpec, hookimpl


@hookimpl
def benchrun_drivers() -> Sequence[DriverSpec]:
    """Return the built-in drivers."""
    from .drivers import DRIVERS

    return DRIVERS


@hookimpl
def benchrun_steps() -> Sequence[StepSpec]:
    """Return the built-in steps."""
    from .steps import STEPS

    return STEPS
