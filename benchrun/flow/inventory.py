"""What is installed, who answers at an address, and the schemas of the files that people write."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from benchrun.acquire.clock import RealClock
from benchrun.drivers.registry import Registry, load_registry
from benchrun.errors import InputError
from benchrun.yaml_source import json_schema

if TYPE_CHECKING:
    from pydantic import BaseModel


def drivers() -> list[dict[str, Any]]:
    """Return a record for each installed driver, with the package that brought it."""
    registry = load_registry()
    return [
        {"name": spec.name, "role": spec.role, "from": _from(registry, spec.name), "what": spec.help}
        for spec in registry.drivers.values()
    ]


def _from(registry: Registry, name: str) -> str:
    plugin = registry.origin(name)
    return f"{plugin.distribution} {plugin.version}"


def identify(address: str, backend: str = "py") -> dict[str, Any]:
    """Return who answers at a VISA address, which driver fits, and what it does not answer.

    Raises InputError for a text that is no address, BenchError.
    """
    from dataclasses import asdict

    from benchrun.drivers.identify import identify as ask
    from benchrun.visa.address import address_fault
    from benchrun.visa.session import Bus

    fault = address_fault(address)
    if fault:
        raise InputError(fault)
    registry = load_registry()
    with Bus(backend) as bus:
        finding = ask(address, registry, bus, RealClock())
    best = finding.best
    return {
        "address": finding.address,
        **asdict(finding.identity),
        "driver": best.driver if best else "none of the installed ones fits",
        "left_to_a_dialect_file": list(best.left_open) if best else [],
        "optional_and_not_answered": list(best.optional_unanswered) if best else [],
        "drivers": [
            {"driver": fit.driver, "fits": fit.fits, "not_answered": ", ".join(fit.unanswered)} for fit in finding.fits
        ],
    }


def schema(kind: str) -> dict[str, Any]:
    """Return the JSON Schema of a kind of file: bench, recipe, dialect or kit."""
    if kind == "dialect":
        from benchrun.visa.dialect import DialectText

        return json_schema(DialectText)
    if kind == "recipe":
        from benchrun.recipe.schema import recipe_schema

        return recipe_schema(load_registry().steps)
    from benchrun.bench import Bench, Kit

    model: type[BaseModel] = Bench if kind == "bench" else Kit
    return json_schema(model)
