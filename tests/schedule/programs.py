"""Recipes at random: nested sweeps of words, of names of one's own and of what can be set, and steps of every kind.

No two steps set the same frequency, so that whatever is set anew in one round of a sweep is set anew in every round.
"""

from __future__ import annotations

from hypothesis import strategies as st

#: What sets both signals up, so that every reading is allowed.
START = """
  - set: {probe.level: 0 dBm, probe.frequency: 2200.4 MHz, pump.frequency: 2100.4 MHz, pump.level: -30 dBm}
"""
SETTABLE = {
    "drive": ("dBm", (5, 20)),
    "pump.level": ("dBm", (-40, -10)),
    "probe.level": ("dBm", (-40, 5)),
    "drain.voltage": ("V", (1, 28)),
    "gate.voltage": ("V", (-6, 0)),
}
READS = (
    "read: {name: a}",
    "read: {name: b, tones: [probe, pump, image], also: [drain.current]}",
    "read: {name: c, waves: [], tones: [pump]}",
    "read: {name: d, over: {frequency: {from: 2 GHz, to: 2.1 GHz, points: 3}}}",
)
STEPS = (
    "settle: 20 ms",
    "settle: 3 s",
    "ask: {text: Look at the fan.}",
    "connect: {plane: output, what: short}",
    "connect: {plane: input, what: device}",
    "bring-up: {gate: -3 V, drain: 10 V}",
    "set: {pump.frequency: 2250.4 MHz}",
    'set: {pump.frequency: "{probe.frequency} - 7.2 MHz"}',
)


def _distinct(low: int, high: int) -> st.SearchStrategy[list[int]]:
    return st.lists(st.integers(low, high), min_size=1, max_size=3, unique=True)


@st.composite
def _line(draw: st.DrawFn, around: tuple[str, ...]) -> str:
    """Return a step that is allowed inside of these sweeps."""
    own = [name for name in around if name.startswith("f")]
    kind = draw(st.sampled_from(("read", "read", "step", "set", "follow", "word")))
    if kind == "read":
        return draw(st.sampled_from(READS))
    if kind == "follow" and own:
        name = draw(st.sampled_from(own))
        signal, least = draw(st.sampled_from((("probe", 1), ("pump", 11))))  # never both at one frequency
        return f'set: {{{signal}.frequency: "{{{name}}} - {draw(st.integers(least, least + 8))} MHz"}}'
    if kind == "word" and "standard" in around:
        return 'connect: {plane: output, what: "{standard}"}'
    if kind == "set":
        taken = {*around, *({"drive", "pump.level"} if {"drive", "pump.level"} & set(around) else ())}
        free = [name for name in SETTABLE if name not in taken]
        if free:
            name = draw(st.sampled_from(free))
            unit, (low, high) = SETTABLE[name]
            return f"set: {{{name}: {draw(st.integers(low, high))} {unit}}}"
    return draw(st.sampled_from(STEPS))


@st.composite
def _sweep(draw: st.DrawFn, around: tuple[str, ...], indent: int) -> str:
    number = len(around)
    names = [f"f{number}", *([] if "standard" in around else ["standard"])]
    names += [name for name in SETTABLE if name not in around]
    if {"drive", "pump.level"} & set(around):
        names = [name for name in names if name not in ("drive", "pump.level")]
    name = draw(st.sampled_from(names))
    space = " " * indent
    inside = draw(_body((*around, name), indent + 4))
    if name.startswith("f"):
        values = ", ".join(f"{2012 + 400 * number + 20 * value} MHz" for value in draw(_distinct(0, 15)))
        inside = f'{space}    - set: {{probe.frequency: "{{{name}}}"}}\n{inside}'
    elif name == "standard":
        values = ", ".join(draw(st.lists(st.sampled_from(("open", "short", "match")), min_size=1, unique=True)))
        inside = f'{space}    - connect: {{plane: output, what: "{{standard}}"}}\n{inside}'
    else:
        unit, (low, high) = SETTABLE[name]
        values = ", ".join(f"{value} {unit}" for value in draw(_distinct(low, high)))
    last = draw(st.sampled_from(READS))
    return f"{space}- sweep: {{{name}: [{values}]}}\n{space}  do:\n{inside}{space}    - {last}\n"


@st.composite
def _body(draw: st.DrawFn, around: tuple[str, ...], indent: int) -> str:
    lines = []
    for _ in range(draw(st.integers(0, 3))):
        if len(around) < 3 and draw(st.booleans()):
            lines.append(draw(_sweep(around, indent)))
        else:
            lines.append(f"{' ' * indent}- {draw(_line(around))}\n")
    return "".join(lines)


def acquires() -> st.SearchStrategy[str]:
    """Return acquire parts at random."""
    return _body((), 2).map(lambda body: START + body)
