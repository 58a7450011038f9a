"""Finds the plugins that are installed, and takes from each the drivers and steps that it brings, checked."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from importlib import metadata
from types import MappingProxyType
from typing import Any, TypeVar

import pluggy
from pydantic import BaseModel

from benchrun.contract import hooks
from benchrun.contract.hooks import ENTRY_POINT_GROUP, PROJECT, DriverSpec, StepSpec
from benchrun.contract.roles import ROLES
from benchrun.errors import FileProblemsError, PluginError

_NAME = re.compile(r"[a-z][a-z0-9]*(-[a-z0-9]+)*")
Spec = TypeVar("Spec", DriverSpec, StepSpec)


@dataclass(frozen=True, slots=True)
class Plugin:
    """One installed plugin: its entry point's name, the distribution it came with, and what it brings."""

    name: str
    distribution: str
    version: str
    drivers: tuple[str, ...]
    steps: tuple[str, ...]

    def __str__(self) -> str:
        return f"plugin '{self.name}' of {self.distribution} {self.version}"


@dataclass(frozen=True, slots=True)
class Registry:
    """All drivers and steps by name, and where each comes from."""

    drivers: Mapping[str, DriverSpec]
    steps: Mapping[str, StepSpec]
    plugins: tuple[Plugin, ...]

    def origin(self, name: str) -> Plugin:
        """Return the plugin that brought this driver or step. Raises KeyError."""
        for plugin in self.plugins:
            if name in plugin.drivers or name in plugin.steps:
                return plugin
        raise KeyError(name)


def load_registry(entry_points: Iterable[metadata.EntryPoint] | None = None) -> Registry:
    """Load every plugin of the entry point group (or those given) and check what it brings.

    Raises PluginError, which names the plugin, the hook and the argument at fault.
    """
    found = metadata.entry_points(group=ENTRY_POINT_GROUP) if entry_points is None else entry_points
    drivers: dict[str, DriverSpec] = {}
    steps: dict[str, StepSpec] = {}
    plugins: list[Plugin] = []
    for entry_point in sorted(found, key=lambda one: (one.name != "built-in", one.name)):
        source = _Source.of(entry_point)
        new_drivers = source.specs("benchrun_drivers", DriverSpec, check_driver)
        new_steps = source.specs("benchrun_steps", StepSpec, check_step)
        source.add("benchrun_drivers", drivers, [(spec.name, spec) for spec in new_drivers], plugins)
        source.add("benchrun_steps", steps, [(spec.key, spec) for spec in new_steps], plugins)
        names = tuple(spec.name for spec in new_drivers), tuple(spec.key for spec in new_steps)
        plugins.append(Plugin(source.name, source.distribution, source.version, *names))
    return Registry(MappingProxyType(drivers), MappingProxyType(steps), tuple(plugins))


@dataclass(frozen=True, slots=True)
class _Source:
    """One plugin while it is being read."""

    name: str
    distribution: str
    version: str
    manager: pluggy.PluginManager

    @classmethod
    def of(cls, entry_point: metadata.EntryPoint) -> _Source:
        """Load the plugin and see that each of its hooks is one of ours."""
        dist = entry_point.dist
        distribution, version = (dist.name, dist.version) if dist else ("an unknown distribution", "")
        where = f"plugin '{entry_point.name}' of {distribution} {version}".rstrip()
        manager = pluggy.PluginManager(PROJECT)
        manager.add_hookspecs(hooks)
        try:
            module = entry_point.load()
            manager.register(module, name=entry_point.name)
            manager.check_pending()
        except Exception as error:
            text = f"{where} ({entry_point.value}) cannot be loaded: {type(error).__name__}: {error}"
            raise PluginError(f"{text}. Repair or uninstall {distribution}") from error
        _see_marked(module, where)
        return cls(entry_point.name, distribution, version, manager)

    def specs(self, hook: str, kind: type[Spec], check: Callable[[Spec], None]) -> list[Spec]:
        """Call one hook of the plugin and check each thing that it returns."""
        found: list[Spec] = []
        for implementation in getattr(self.manager.hook, hook).get_hookimpls():
            try:
                returned = list(implementation.function())
            except Exception as error:
                raise self._error(hook, f"failed: {type(error).__name__}: {error}") from error
            for position, spec in enumerate(returned, 1):
                if not isinstance(spec, kind):
                    raise self._error(hook, f"item {position} is {spec!r}; it must be a {kind.__name__}")
                try:
                    check(spec)
                except (PluginError, FileProblemsError) as error:
                    raise self._error(hook, f"item {position}: {error}") from error
                found.append(spec)
        return found

    def add(
        self, hook: str, known: dict[str, Spec], new: Iterable[tuple[str, Spec]], plugins: Sequence[Plugin]
    ) -> None:
        """Add specs under their names; a name that is taken is refused."""
        for name, spec in new:
            if name in known:
                owners = [str(plugin) for plugin in plugins if name in plugin.drivers or name in plugin.steps]
                owner = owners[0] if owners else "this plugin itself"
                raise self._error(hook, f"the name {name!r} is taken by {owner}. Rename one, or uninstall one")
            known[name] = spec

    def _error(self, hook: str, text: str) -> PluginError:
        return PluginError(f"plugin '{self.name}' of {self.distribution} {self.version}, hook {hook}: {text}")


def _see_marked(module: Any, where: str) -> None:
    """A function that is called like a hook and not marked as one would be passed over in silence."""
    for name in dir(module):
        one = getattr(module, name)
        if name.startswith("benchrun_") and callable(one) and not hasattr(one, f"{PROJECT}_impl"):
            raise PluginError(
                f"{where}: {name} is named like a hook and not marked with @hookimpl of benchrun.contract.hooks"
            )


def check_driver(spec: DriverSpec) -> None:
    """Raise PluginError or FileProblemsError where a driver breaks the contract; the message names the argument."""
    from benchrun.drivers.dialects import parse_dialect

    _check_name("name", spec.name)
    _check(spec.role in ROLES, "role", spec.role, f"one of {', '.join(ROLES)}")
    _check(bool(spec.help.strip()), "help", spec.help, "a line of text")
    _check(callable(spec.build), "build", spec.build, "something to call with (link, settings)")
    text = parse_dialect(spec.dialect, f"dialect of driver {spec.name}")
    for argument in ("needs", "optional"):
        for entry in getattr(spec, argument):
            _check(entry in text.entries, argument, entry, f"an entry of its dialect ({', '.join(text.entries)})")


def check_step(spec: StepSpec) -> None:
    """Raise PluginError where a step breaks the contract; the message names the argument."""
    _check_name("key", spec.key)
    is_model = isinstance(spec.model, type) and issubclass(spec.model, BaseModel)
    _check(is_model, "model", spec.model, "a class derived from pydantic.BaseModel")
    _check(bool(spec.help.strip()), "help", spec.help, "a line of text")
    _check(callable(spec.expand), "expand", spec.expand, "something to call with (model, scope)")
    for argument in ("execute", "duration_s"):
        one = getattr(spec, argument)
        _check(one is None or callable(one), argument, one, "None or something to call")


def _check_name(argument: str, name: object) -> None:
    good = isinstance(name, str) and bool(_NAME.fullmatch(name))
    _check(good, argument, name, "lower-case words joined by hyphens")


def _check(good: bool, argument: str, given: object, expected: str) -> None:
    if not good:
        raise PluginError(f"argument {argument} is {given!r}; it must be {expected}")
