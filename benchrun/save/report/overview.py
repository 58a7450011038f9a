"""The head of a report: what was measured, with what, how it ended; who was on the bench; what happened, in order."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from benchrun.archive import Event
from benchrun.save.report.figures import UNKNOWN, duration_text, named, time_text
from benchrun.save.report.subject import Subject

Facts = list[tuple[str, str]]
#: Kinds of events that say why a run ended early.
ENDED_BY = ("failure", "guard", "stop")


@dataclass(frozen=True, slots=True)
class State:
    """How a run ended: one word, a sentence, and whether that is a reason to look closer."""

    word: str
    sentence: str
    alarm: bool


@dataclass(frozen=True, slots=True)
class LogLine:
    """One event: when (UTC, and bench time), its kind in words, its text; details, and exchanges with an instrument."""

    utc: str
    bench_time: str
    kind: str
    text: str
    details: Facts
    exchanges: tuple[tuple[str, str, str, str], ...]


#: How a run is said to have ended, by its state; what ended it and how many readings there are follow.
SENTENCES = {
    "complete": "The run went to its end.",
    "running": "The run had not ended when this report was made, or it broke off without a word.",
    "stopped": "The run was stopped before its end.",
    "failed": "The run failed.",
    "unsafe": "The safe state was not confirmed: look at the bench before you touch it.",
}


def state(subject: Subject) -> State:
    """Return how the run ended: what ended it early, and what is not safe where something is not."""
    meta, alarm = subject.meta, subject.meta.state != "complete"
    kinds = [*ENDED_BY, "safe-state"] if meta.state == "unsafe" else ENDED_BY
    why = [f"{event.text.rstrip('.')}." for event in subject.events if event.kind in kinds and alarm]
    count = f"{subject.count} of {meta.readings_planned} readings are in the archive."
    return State(meta.state, " ".join([SENTENCES.get(meta.state, ""), *why, count]).strip(), alarm)


def facts(subject: Subject) -> Facts:
    """Return what was measured, on which device and bench, when and by whom."""
    meta, bench = subject.meta, subject.bench
    told = [
        ("Device", device_text(subject)),
        ("Origin", f"{meta.origin}: nothing real was measured" if subject.simulated else "real instruments"),
        ("Readings", _readings(subject)),
        ("Started", time_text(meta.started_utc)),
        ("Ended", time_text(meta.ended_utc)),
        ("Time on the bench", duration_text(_bench_time_s(subject))),
        ("Operator", meta.operator or UNKNOWN),
        ("Bench", f"{bench.title if bench else UNKNOWN} ({meta.bench})"),
        ("Interlock", (bench.interlock if bench else None) or "none is declared in the bench file"),
        ("Recipe", meta.recipe),
        *(_known(name, subject) for name in subject.known),
    ]
    return [(name, text) for name, text in told if text]


def sources(subject: Subject) -> Facts:
    """Return what says exactly which data this is."""
    meta = subject.meta
    hashes = [("Run", meta.run_id), ("Readings, SHA-256", subject.digest), ("Schedule, SHA-256", meta.schedule_hash)]
    return hashes + [(name, version) for name, version in meta.versions.items()]


def instruments(subject: Subject) -> list[tuple[str, ...]]:
    """Return a row for each instrument: name, maker, model, serial, firmware, options, calibration due, reference."""
    meta = subject.meta
    rows = []
    for name, who in meta.identities.items():
        fields = [str(who.get(key, "") or UNKNOWN) for key in ("maker", "model", "serial", "firmware", "options")]
        rows.append((name, *fields, time_text(meta.cal_due[name]) if name in meta.cal_due else "not known"))
    return rows


def parts(subject: Subject) -> Facts:
    """Return the parts of the bench, each in a word or two."""
    return [] if subject.bench is None else [(name, part.summary) for name, part in subject.bench.parts.items()]


def log_lines(subject: Subject) -> list[LogLine]:
    """Return what happened, in order."""
    return [_line(event) for event in subject.events]


def device_text(subject: Subject) -> str:
    """Return the device in words; what stands in the recipe's head where none is named: the bench."""
    device = subject.meta.device
    part, serial, note = (device.get(key, "") for key in ("part", "serial", "note"))
    return ", ".join(text for text in (part, serial and f"serial {serial}", note) if text) or "no device is named"


def _readings(subject: Subject) -> str:
    repeated = f"; {subject.repeated} more attempts were replaced by later ones" if subject.repeated else ""
    return f"{subject.count} of {subject.meta.readings_planned} planned{repeated}"


def _known(name: str, subject: Subject) -> tuple[str, str]:
    one = subject.known[name]
    return f"Uses {name}", f"{one.plane} plane, made {time_text(one.circumstances.made_utc)}"


def _bench_time_s(subject: Subject) -> float:
    ends = [reading.ended_ns for readings in subject.readings.values() for reading in readings]
    return max([*ends, *(event.at_ns for event in subject.events)], default=0) * 1e-9


def _line(event: Event) -> LogLine:
    detail = {key: value for key, value in event.detail.items() if key != "exchanges"}
    said = event.detail.get("exchanges", ())
    exchanges = tuple(_exchange(one) for one in said) if isinstance(said, list) else ()
    return LogLine(
        event.at_utc[:19].replace("T", " ") or UNKNOWN,
        duration_text(event.at_ns * 1e-9),
        event.kind.replace("-", " "),
        event.text,
        [pair for key, value in detail.items() for pair in _told(key, value)],
        exchanges,
    )


def _exchange(said: Mapping[str, Any]) -> tuple[str, str, str, str]:
    at_s = float(said.get("time_ns", 0)) * 1e-9
    sent, received, error = (str(said.get(key, "")) for key in ("sent", "received", "error"))
    return f"{at_s:.3f}", sent, received, error


def _told(key: str, value: Any) -> Iterator[tuple[str, str]]:
    """Yield a detail as names and texts; what is nested is told one level deep."""
    match value:
        case None | "" | [] | {}:
            return
        case bool():
            yield key.replace("_", " "), "yes" if value else "no"
        case Mapping():
            yield key.replace("_", " "), ", ".join(_pair(str(name), one) for name, one in value.items())
        case list() | tuple():
            yield key.replace("_", " "), ", ".join(one if isinstance(one, str) else json.dumps(one) for one in value)
        case int() | float():
            name, _, figure = named(key, float(value)).rpartition(f"{key} ")
            yield name or key.replace("_", " "), figure
        case _:
            yield key.replace("_", " "), str(value)


def _pair(name: str, value: Any) -> str:
    if isinstance(value, bool):
        return f"{name.replace('_', ' ')} {'yes' if value else 'no'}"
    return named(name, float(value)) if isinstance(value, int | float) else f"{name.replace('_', ' ')} {value}"
