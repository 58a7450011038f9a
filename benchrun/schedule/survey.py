"""The survey of a program: every mistake that can be found without going through all conditions.

Each step is expanded where every sweep is at its first value, its second and its last; a step that sets
something also at the extremes of every sweep that it refers to. Sums of references have their extremes there. What
lies between is looked at by the level check, which goes through all conditions.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterator, Mapping, Sequence

from benchrun.bench import Bench, Kit
from benchrun.contract.actions import Action, AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.kinds import Kind
from benchrun.errors import FileProblemsError, InputError, PluginError, Problem
from benchrun.quantities import show
from benchrun.recipe.axis import Evenly
from benchrun.recipe.model import Place
from benchrun.schedule.drive import DRIVE, Driver
from benchrun.schedule.program import Node, ReadSite, StepNode, SweepNode, count_readings, shape_of
from benchrun.schedule.scope import Scope, in_range
from benchrun.schedule.state import CONNECTED, PROBE_FREQUENCY, State

#: Most combinations of extremes that one step is expanded at.
MOST_EXTREMES = 4096
DEVICE = "device"


class Survey:
    """Goes through a program twice and fills in what its nodes do; `problems` are the mistakes found."""

    def __init__(
        self, bench: Bench, kit: Kit | None, driver: Driver | None, scope: Scope, new_state: Callable[[], State]
    ) -> None:
        self.problems: list[Problem] = []
        self._bench, self._driver, self._scope, self._new_state = bench, driver, scope, new_state
        self._settables, self._readables = bench.settables(), bench.readables()
        self._planes = {signal.plane for signal in bench.signals.values()}
        self._connectable = self._what_connects(kit)
        self._state = new_state()
        self._around: list[SweepNode] = []
        self._doubtful = False
        """A step or a sweep failed: what it would have set is not missed again behind it."""

    def _what_connects(self, kit: Kit | None) -> tuple[str, ...] | None:
        """Return what can be connected to a plane, None where no kit says which standards there are."""
        meters = [name for name in self._bench.instruments if self._bench.role(name) == "power-meter"]
        return None if kit is None else (DEVICE, *meters, *kit.standards)

    def run(self, body: Sequence[Node]) -> None:
        """Survey a program."""
        for pick in (0, 1, -1):
            self._state = self._new_state()
            self._scope.stand(self._state.values, self._state.words)
            self._list(body, pick)
        self._order(body, [])
        count_readings(body)
        self._reading(body)

    def _reading(self, body: Sequence[Node]) -> None:
        """Refuse sweeps that read nothing: what is between their ends would never be looked at."""
        for node in body:
            if isinstance(node, SweepNode):
                self._reading(node.body)
                if not node.each and not self.problems:
                    text = (
                        f"the sweep of {node.axis.name} reads nothing. Put a read step into it, or write its steps out."
                    )
                    self.problems.append(node.place.problem(text))

    def _list(self, body: Sequence[Node], pick: int) -> None:
        for node in body:
            if isinstance(node, SweepNode):
                self._sweep(node, pick)
            else:
                self._step(node, first=pick == 0)
        coming: tuple[str, ...] = ()
        at_once = False
        for node in reversed(body):
            if isinstance(node, StepNode):
                node.following, node.apart = coming, not at_once
                coming = node.reads[0].signals if node.reads else coming
            at_once = isinstance(node, StepNode) and bool(node.reads)

    def _sweep(self, node: SweepNode, pick: int) -> None:
        name, value = node.axis.name, node.axis.values[min(pick, len(node.axis) - 1)]
        self._state.put(name, value)
        self._attempt(node.place, lambda: self._begin(node, value))
        self._around.append(node)
        self._list(node.body, pick)
        self._around.pop()
        if not node.axis.settable:
            self._state.leave(name)

    def _begin(self, node: SweepNode, value: float | str) -> None:
        self._not_swept_around(node.axis.name)
        if not node.axis.settable or isinstance(value, str):
            return
        settable = self._settables[node.axis.name]
        for extreme in _extremes(node):
            in_range(float(extreme), settable)
        self._state.apply(SetAction(((node.axis.name, value),)))

    def _attempt(self, place: Place, what: Callable[[], None]) -> bool:
        """Do something; turn what is wrong with it into problems. Returns whether there were any."""
        try:
            what()
        except FileProblemsError as error:
            self.problems += error.problems
        except InputError as error:
            self.problems.append(place.problem(str(error)))
        else:
            return False
        self._doubtful = True
        return True

    # Steps

    def _step(self, node: StepNode, *, first: bool) -> None:
        before = dict(self._state.values), dict(self._state.words)
        if self._attempt(node.place, lambda: self._expand(node)) or not first:
            return
        if node.changes:
            self._at_extremes(node, *before)

    def _expand(self, node: StepNode) -> None:
        reads, done = list[ReadSite](), list[Action]()
        self._scope.begin(node.following)
        for action in self._scope.actions(node):
            self._check(action)
            self._remember(node, action)
            if isinstance(action, ReadAction):
                reads.append(_site(action))
            done.append(action)
            self._state.apply(action)
            self._scope.has_set(action)
        node.uses |= self._scope.noted
        known, node.shape = node.shape or shape_of(done), shape_of(done)
        if known != node.shape or (node.reads and node.reads != tuple(reads)):
            raise PluginError(
                f"step '{node.spec.key}' does other things here than at other conditions: it {'; '.join(node.shape)}. "
                "A step always does and reads the same; only values may follow the conditions."
            )
        node.reads, node.prompts = tuple(reads), sum(isinstance(action, AskAction) for action in done)

    def _remember(self, node: StepNode, action: Action) -> None:
        if isinstance(action, SetAction):
            node.changes |= {name for name, _ in action.values}
        if isinstance(action, AskAction) and action.connect is not None:
            node.changes |= {CONNECTED + action.connect[0]}
        if isinstance(action, AskAction | ProcedureAction):
            node.unbiases = True

    def _check(self, action: Action) -> None:
        """Raise InputError for an action that the bench cannot do."""
        if isinstance(action, SetAction):
            self._check_set(action)
        elif isinstance(action, ReadAction):
            self._check_read(action)
        elif isinstance(action, SettleAction):
            self._check_on(action.signals, needs_probe_frequency=False)
        elif isinstance(action, AskAction) and action.connect is not None:
            self._check_connect(*action.connect)

    def _check_set(self, action: SetAction) -> None:
        names = [name for name, _ in action.values]
        if self._driver is not None and DRIVE in names and self._driver.level in names:
            raise InputError(f"{DRIVE} sets {self._driver.level}; set one of the two.")
        for name, value in action.values:
            self._not_swept_around(name)
            if name not in self._settables:
                raise InputError(f"nothing that can be set is called '{name}'. It has {', '.join(self._settables)}.")
            in_range(value, self._settables[name])

    def _not_swept_around(self, name: str) -> None:
        """Raise InputError where a sweep around this place sets the same."""
        tied = {DRIVE, self._driver.level} if self._driver else set()
        for sweep in self._around:
            swept = sweep.axis.name
            if swept == name:
                raise InputError(
                    f"{name} is swept around this step, at line {sweep.place.line}; it cannot be set inside as well."
                )
            if {swept, name} <= tied:
                raise InputError(
                    f"{swept} is swept around this step, at line {sweep.place.line}, and {DRIVE} sets the level."
                )

    def _check_read(self, action: ReadAction) -> None:
        for name in action.scalars:
            if name not in self._readables:
                raise InputError(
                    f"also: nothing that can be read is called '{name}'. It has {', '.join(self._readables)}."
                )
        capture = action.capture
        own_grid = capture is not None and capture.frequencies_hz != (self._state.values.get(PROBE_FREQUENCY),)
        self._check_on(action.signals, needs_probe_frequency=not own_grid)
        if capture is not None:
            self._check_tuning(action)

    def _check_on(self, signals: Sequence[str], *, needs_probe_frequency: bool) -> None:
        """Raise InputError for a signal that would be on at a level or a frequency that nobody has set."""
        if self._doubtful:
            return
        for name in signals:
            for quantity in ("level", "frequency"):
                full = f"{name}.{quantity}"
                if full in self._state.values or (full == PROBE_FREQUENCY and not needs_probe_frequency):
                    continue
                or_drive = f" (or {DRIVE})" if self._driver and full == self._driver.level else ""
                raise InputError(
                    f"{name} is on here, and {full}{or_drive} was not set before. Set it, so that its level is known."
                )

    def _check_tuning(self, action: ReadAction) -> None:
        """Raise InputError where a receiver would be tuned beyond its instrument's frequencies."""
        assert action.capture is not None
        for wave in action.capture.waves:
            limits = self._bench.instruments[self._bench.receivers[wave].instrument].limits.frequency
            for frequency_hz in _tunings(action):
                if limits is not None and not limits[0] <= frequency_hz <= limits[1]:
                    ends = f"{show(limits[0], 'frequency')} to {show(limits[1], 'frequency')}"
                    raise InputError(
                        f"receiver {wave} would be at {show(frequency_hz, 'frequency')}; the bench file allows {ends}."
                    )

    def _check_connect(self, plane: str, what: str) -> None:
        if plane not in self._planes:
            raise InputError(f"there is no {plane} plane on this bench; it has {', '.join(sorted(self._planes))}.")
        if self._connectable is not None and what not in self._connectable:
            raise InputError(f"nothing called '{what}' can be connected; there is {', '.join(self._connectable)}.")

    def _at_extremes(self, node: StepNode, numbers: Mapping[str, float], words: Mapping[str, str]) -> None:
        """Expand a step that sets something at the extremes of the sweeps that it refers to."""
        sweeps = [sweep for sweep in self._around if sweep.axis.name in node.uses]
        combinations = itertools.product(*(_extremes(sweep) for sweep in sweeps))
        for values in itertools.islice(combinations, MOST_EXTREMES):
            at = {sweep.axis.name: value for sweep, value in zip(sweeps, values, strict=True)}
            there = {**numbers, **{name: value for name, value in at.items() if not isinstance(value, str)}}
            called = {**words, **{name: value for name, value in at.items() if isinstance(value, str)}}
            if self._attempt(node.place, lambda: self._try(node, there, called)):  # noqa: B023  called at once
                break
        self._scope.stand(self._state.values, self._state.words)

    def _try(self, node: StepNode, numbers: Mapping[str, float], words: Mapping[str, str]) -> None:
        for action in self._scope.expanded(node, numbers, words):
            if isinstance(action, SetAction | AskAction):
                self._check(action)

    # Order

    def _order(self, body: Sequence[Node], lists: list[tuple[Sequence[Node], int]]) -> None:
        """Refuse steps that set something from what an earlier round of a sweep left behind."""
        for position, node in enumerate(body):
            way = [*lists, (body, position)]
            if isinstance(node, SweepNode):
                self._order(node.body, way)
            elif node.changes:
                for name in sorted(node.uses & self._settables.keys()):
                    if _stale(name, way):
                        self.problems.append(node.place.problem(
                            f"{name} is set later in the same sweep, so what this step makes of it would depend on "
                            "the round before. Set it before this step."
                        ))  # fmt: skip


def _stale(name: str, way: Sequence[tuple[Sequence[Node], int]]) -> bool:
    """Whether a name may hold, at the end of a way, what a round before has set."""
    for depth in range(len(way) - 1, 0, -1):
        body, position = way[depth]
        outer_body, outer_position = way[depth - 1]
        sweep = outer_body[outer_position]
        assert isinstance(sweep, SweepNode)
        if any(name in node.changes for node in body[:position]) or sweep.axis.name == name:
            return False
        if any(name in node.changes for node in body[position:]):
            return True
    return False


def _site(action: ReadAction) -> ReadSite:
    capture = action.capture
    waves = () if capture is None else capture.waves
    grid = capture.frequencies_hz if capture is not None and len(capture.frequencies_hz) > 1 else ()
    return ReadSite(action.name, action.signals, waves, action.scalars, grid, capture is not None and capture.follow)


def _tunings(action: ReadAction) -> Iterator[float]:
    assert action.capture is not None
    for grid_hz in (min(action.capture.frequencies_hz), max(action.capture.frequencies_hz)):
        for offset_hz in action.capture.offsets_hz:
            yield grid_hz + offset_hz


def _extremes(node: SweepNode) -> Sequence[float | str]:
    """Return the smallest and the largest value of a sweep, or all of its words."""
    values = node.axis.values
    if node.axis.kind == "text":
        return tuple(dict.fromkeys(values))
    if isinstance(values, Evenly):
        return (values[0], values[-1])
    numbers = [float(value) for value in values]
    return (min(numbers), max(numbers))


def kinds_of(body: Sequence[Node], known: Mapping[str, Kind]) -> tuple[list[Problem], dict[str, Kind]]:
    """Return the kind of every settable and variable by name, and a problem for each that is swept as two kinds."""
    kinds, problems = dict(known), list[Problem]()
    for node in body:
        if isinstance(node, SweepNode):
            name, kind = node.axis.name, node.axis.kind
            if kinds.setdefault(name, kind) != kind:
                text = f"'{name}' is a {kinds[name]} elsewhere in this recipe; give this one another name."
                problems.append(node.place.problem(text))
            more, kinds = kinds_of(node.body, kinds)
            problems += more
    return problems, kinds
