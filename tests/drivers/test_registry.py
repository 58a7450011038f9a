"""What the registry finds, and what it refuses: messages that name the plugin, the hook and the argument."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from dataclasses import replace
from importlib.metadata import EntryPoint
from types import ModuleType
from typing import Any

import pytest
from pydantic import BaseModel

from benchrun.contract.hooks import DriverSpec, StepSpec, hookimpl
from benchrun.drivers.registry import Registry, load_registry
from benchrun.errors import PluginError

GOOD = DriverSpec(
    name="whisker-gauge",
    role="thermometer",
    help="Reads whiskers.",
    dialect="benchrun: 1\nentries:\n  temperature: {ask: 'MEASure:TEMPerature?', reply: temperature}\n",
    needs=("temperature",),
    build=lambda link, settings: None,  # type: ignore[arg-type, return-value]
)
STEP = StepSpec(key="whistle", model=BaseModel, help="Whistles.", expand=lambda model, scope: iter(()))


class Plugins:
    """Makes plugins out of what their hooks return."""

    def __init__(self) -> None:
        self.entry_points: list[EntryPoint] = []

    def add(self, name: str, *, drivers: Any = None, steps: Any = None, **attributes: Any) -> None:
        module = ModuleType(f"plugin_of_test_{name.replace('-', '_')}")
        for hook, returned in (("benchrun_drivers", drivers), ("benchrun_steps", steps)):
            if returned is not None:
                function = returned if callable(returned) else (lambda found=returned: found)
                function.__name__ = hook
                setattr(module, hook, hookimpl(_of_no_arguments(function)))
        for attribute, value in attributes.items():
            setattr(module, attribute, value)
        sys.modules[module.__name__] = module
        self.entry_points.append(EntryPoint(name, module.__name__, "benchrun.plugins"))

    def load(self) -> Registry:
        return load_registry(self.entry_points)


def _of_no_arguments(function: Any) -> Any:
    def hook() -> Any:
        return function()

    return hook


@pytest.fixture
def plugins() -> Iterator[Plugins]:
    before = set(sys.modules)
    yield Plugins()
    for name in set(sys.modules) - before:
        if name.startswith("plugin_of_test"):
            del sys.modules[name]


def test_the_built_in_ones_are_found_like_anyones(registry: Registry) -> None:
    assert set(registry.drivers) >= {"wave-receiver", "signal-source", "power-meter", "dc-supply", "thermometer"}
    origin = registry.origin("wave-receiver")
    assert (origin.name, origin.distribution) == ("built-in", "benchrun")
    assert origin.version
    with pytest.raises(KeyError):
        registry.origin("wave-organ")


def test_drivers_and_steps_of_others(plugins: Plugins) -> None:
    plugins.add("field", drivers=[GOOD], steps=[STEP])
    plugins.add("empty")
    registry = plugins.load()
    assert dict(registry.drivers) == {"whisker-gauge": GOOD}
    assert dict(registry.steps) == {"whistle": STEP}
    assert [plugin.name for plugin in registry.plugins] == ["empty", "field"]
    assert registry.origin("whistle").name == "field"


def test_built_in_comes_first(plugins: Plugins) -> None:
    plugins.add("aaa")
    plugins.add("built-in")
    assert [plugin.name for plugin in plugins.load().plugins] == ["built-in", "aaa"]


@pytest.mark.parametrize(
    ("argument", "value", "expected"),
    [
        ("name", "Whisker Gauge", "lower-case words"),
        ("role", "barometer", "one of wave-receiver"),
        ("help", " ", "a line of text"),
        ("build", None, "something to call"),
        ("needs", ("pressure",), "an entry of its dialect"),
        ("optional", ("pressure",), "an entry of its dialect"),
    ],
)
def test_a_bad_driver_names_its_argument(plugins: Plugins, argument: str, value: Any, expected: str) -> None:
    plugins.add("field", drivers=[GOOD, replace(GOOD, **{argument: value})])
    with pytest.raises(
        PluginError, match=rf"plugin 'field'.*hook benchrun_drivers: item 2: argument {argument} is .*{expected}"
    ):
        plugins.load()


@pytest.mark.parametrize("dialect", ["", "entries: [", "benchrun: 2\n", "benchrun: 1\nentries: {a: {sett: A}}\n"])
def test_a_bad_dialect_is_the_drivers_fault(plugins: Plugins, dialect: str) -> None:
    plugins.add("field", drivers=[replace(GOOD, dialect=dialect)])
    with pytest.raises(PluginError, match=r"hook benchrun_drivers: item 1: dialect of driver whisker-gauge"):
        plugins.load()


@pytest.mark.parametrize(
    ("argument", "value", "expected"),
    [
        ("key", "two words", "lower-case words"),
        ("model", dict, "derived from pydantic"),
        ("help", "", "a line of text"),
        ("expand", 3, "something to call"),
        ("execute", 3, "None or something to call"),
        ("duration_s", 3, "None or something to call"),
    ],
)
def test_a_bad_step_names_its_argument(plugins: Plugins, argument: str, value: Any, expected: str) -> None:
    plugins.add("field", steps=[replace(STEP, **{argument: value})])
    with pytest.raises(
        PluginError, match=rf"plugin 'field'.*hook benchrun_steps: item 1: argument {argument} .*{expected}"
    ):
        plugins.load()


def test_things_that_are_no_specs(plugins: Plugins) -> None:
    plugins.add("field", drivers=["whisker-gauge"])
    with pytest.raises(PluginError, match=r"item 1 is 'whisker-gauge'; it must be a DriverSpec"):
        plugins.load()


def test_a_hook_that_fails(plugins: Plugins) -> None:
    plugins.add("field", steps=lambda: 1 / 0)
    with pytest.raises(PluginError, match=r"hook benchrun_steps: failed: ZeroDivisionError") as caught:
        plugins.load()
    assert isinstance(caught.value.__cause__, ZeroDivisionError)


def test_a_hook_that_returns_nothing(plugins: Plugins) -> None:
    plugins.add("field", steps=lambda: None)
    with pytest.raises(PluginError, match=r"hook benchrun_steps: failed: TypeError"):
        plugins.load()


def test_a_plugin_that_cannot_be_loaded(plugins: Plugins) -> None:
    plugins.entry_points.append(EntryPoint("broken", "module_that_is_not_there", "benchrun.plugins"))
    with pytest.raises(
        PluginError, match=r"plugin 'broken' .*module_that_is_not_there.* cannot be loaded: ModuleNotFoundError"
    ):
        plugins.load()


def test_a_hook_of_another_name(plugins: Plugins) -> None:
    plugins.add("field", benchrun_dirvers=hookimpl(lambda: []))
    with pytest.raises(PluginError, match=r"benchrun_dirvers"):
        plugins.load()


def test_a_hook_that_was_not_marked(plugins: Plugins) -> None:
    plugins.add("field", benchrun_drivers=lambda: [GOOD])
    with pytest.raises(PluginError, match=r"benchrun_drivers is named like a hook and not marked"):
        plugins.load()


def test_one_name_twice(plugins: Plugins) -> None:
    plugins.add("field", drivers=[GOOD])
    plugins.add("stream", drivers=[GOOD])
    with pytest.raises(PluginError, match=r"plugin 'stream'.*'whisker-gauge' is taken by plugin 'field'"):
        plugins.load()


def test_one_name_twice_in_one_plugin(plugins: Plugins) -> None:
    plugins.add("field", steps=[STEP, STEP])
    with pytest.raises(PluginError, match=r"'whistle' is taken by this plugin itself"):
        plugins.load()
