"""The wiring document: what a rehearsal is told of a bench; plain SI, the file's words with underscores and units."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from pydantic import BaseModel

from benchrun.bench import touchstone
from benchrun.bench.kit import Kit
from benchrun.bench.parts import Part
from benchrun.bench.ratios import RatioTable

if TYPE_CHECKING:
    from benchrun.bench.instruments import Instrument
    from benchrun.bench.model import Bench, Bias


def document(bench: Bench, kit: Kit | None = None) -> dict[str, Any]:
    """Return the whole document; standards are those of `kit`."""
    return {
        "instruments": {name: {"role": bench.role(name), **_instrument(i)} for name, i in bench.instruments.items()},
        "parts": {name: _part(part) for name, part in bench.parts.items()},
        "signals": {name: _as_written(signal) for name, signal in bench.signals.items()},
        "receivers": {name: _as_written(receiver) for name, receiver in bench.receivers.items()},
        "bias": {name: _bias(bias) for name, bias in bench.bias.items()},
        "device": {
            "maximum_input_dbm": bench.device.maximum.input,
            "maximum_output_dbm": bench.device.maximum.output,
        },
        "standards": _standards(kit) if kit else {},
        "rehearsal": _rehearsal(bench),
    }


def _rehearsal(bench: Bench) -> dict[str, Any]:
    return bench.rehearsal.model_dump(exclude_unset=True, exclude={"kit"}) if bench.rehearsal else {}


def _as_written(model: BaseModel) -> dict[str, Any]:
    return model.model_dump(mode="json")


def _without_none(plain: dict[str, Any]) -> dict[str, Any]:
    return {name: value for name, value in plain.items() if value is not None}


def _instrument(instrument: Instrument) -> dict[str, Any]:
    plain: dict[str, Any] = {"address": instrument.address, "ceiling_dbm": instrument.ceiling}
    if instrument.tones:
        plain["coherent"] = instrument.tones == "coherent"
    if port := instrument.source_port:
        plain |= {"source_port": port.number, "power_up_dbm": port.power_up, "port_damage_dbm": port.damage}
    if own := instrument.receiver:
        levels = {"linear_dbm": own.linear, "damage_dbm": own.damage, "floor_dbm": own.floor}
        plain["receiver"] = _without_none(levels)
    if sensor := instrument.sensor:
        plain["sensor"] = {
            "linear_dbm": sensor.linear, "damage_dbm": sensor.damage, "reflection": sensor.reflection,
        }  # fmt: skip
    return _without_none(plain)


_IN_DB = ("loss", "gain", "isolation", "coupling", "directivity")


def _part(part: Part) -> dict[str, Any]:
    plain: dict[str, Any] = {"kind": part.kind}
    for name in _IN_DB:
        ratio = getattr(part, name, None)
        plain[f"{name}_db"] = _table(ratio, name) if isinstance(ratio, RatioTable) else ratio
    return _without_none({**plain, "linear_dbm": part.linear, "damage_dbm": part.damage})


def _table(table: RatioTable, name: str) -> dict[str, list[float]]:
    return {"frequency_hz": list(table.frequency_hz), f"{name}_db": list(table.ratio_db)}


def _bias(bias: Bias) -> dict[str, Any]:
    return _without_none(
        {
            "instrument": bias.instrument,
            "channel": bias.channel,
            "voltage_v": list(bias.voltage),
            "current_limit_a": bias.current_limit,
            "over_voltage_v": bias.over_voltage,
            "pinch_off_v": bias.pinch_off,
            "released_below_v": bias.released_below,
        }
    )


def _standards(kit: Kit) -> dict[str, Any]:
    return {name: _standard(description, kit) for name, description in kit.plain().items()}


def _standard(description: dict[str, Any], kit: Kit) -> dict[str, Any]:
    """Return a definition in the wiring's words; data as numbers, so that a rehearsal reads no file."""
    if description["kind"] == "data":
        frequency_hz, s = touchstone.parse(description["file"], kit.files[description["file"]], ports=1)
        pairs = [[float(value.real), float(value.imag)] for value in s[:, 0, 0]]
        return {"kind": "data", "frequency_hz": frequency_hz.tolist(), "reflection": pairs}
    plain = dict(description)
    plain["line_ohm"] = plain.pop("line_impedance_ohm")
    if description["kind"] == "match" and "inductance" in plain:
        plain["inductance_h"] = plain.pop("inductance")[0]
    return plain
