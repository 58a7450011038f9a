"""What is in force on the bench as a schedule goes along, and which actions still change anything."""

from __future__ import annotations

from collections.abc import Mapping

from benchrun.contract.actions import Action, AskAction, ProcedureAction, SetAction
from benchrun.contract.kinds import Kind
from benchrun.quantities import column
from benchrun.schedule.drive import DRIVE, Driver

CONNECTED = "connected."
PROBE_FREQUENCY = "probe.frequency"


class State:
    """Values (SI) and words in force. `put` and `apply` change them; `conditions` names them with their units."""

    def __init__(self, driver: Driver | None, bias: frozenset[str], kinds: Mapping[str, Kind]) -> None:
        self.values: dict[str, float] = {}
        self.words: dict[str, str] = {}
        self._driver, self._bias = driver, bias
        self._columns = {name: column(name, kind) for name, kind in kinds.items()}

    def put(self, name: str, value: float | str) -> None:
        """Let a variable that nothing on the bench has stand for a value."""
        if isinstance(value, str):
            self.words[name] = value
        else:
            self.values[name] = value

    def leave(self, name: str) -> None:
        """Forget a variable: its sweep is over."""
        self.values.pop(name, None)
        self.words.pop(name, None)

    def apply(self, action: Action) -> Action | None:
        """Bring an action into force. Returns what of it changes anything, None for nothing. Raises InputError."""
        if isinstance(action, SetAction):
            changed = [(name, value) for name, value in self._set(action) if name != DRIVE]
            return SetAction(tuple(changed)) if changed else None
        if isinstance(action, AskAction | ProcedureAction):
            for name in self._bias & self.values.keys():
                del self.values[name]
        if isinstance(action, AskAction) and action.connect is not None:
            self.words[CONNECTED + action.connect[0]] = action.connect[1]
        return action

    def _set(self, action: SetAction) -> list[tuple[str, float]]:
        changed = [(name, value) for name, value in action.values if self.values.get(name) != value]
        self.values.update(changed)
        driver, named = self._driver, {name for name, _ in action.values}
        if driver is None:
            return changed
        if driver.level in named:
            self.values.pop(DRIVE, None)
        elif named & {DRIVE, driver.frequency} and DRIVE in self.values and driver.frequency in self.values:
            level = driver.level_dbm(self.values[DRIVE], self.values[driver.frequency])
            if self.values.get(driver.level) != level:
                self.values[driver.level] = level
                changed.append((driver.level, level))
        return changed

    def conditions(self) -> dict[str, float | str]:
        """Return what is in force, named with units ("pump.level_dbm"); words as they are."""
        columns = map(self._columns.__getitem__, self.values)
        found: dict[str, float | str] = dict(zip(columns, self.values.values(), strict=True))
        found.update(self.words)
        return found
