"""The demo bench as a wiring document, for tests of the world alone."""

from __future__ import annotations

from typing import Any

from benchrun_sim.world import World

PERFECT = dict.fromkeys(
    (
        "thermal_memory",
        "noise",
        "drift",
        "definitions",
        "repeatability",
        "compression",
        "crosstalk",
        "skirt",
        "bias_resonance",
        "dispersion",
        "second_order",
        "meter_error",
    ),
    False,
)


def demo_wiring(**rehearsal: Any) -> dict[str, Any]:
    """The output-match bench of the balloon's telemetry driver."""
    return {
        "instruments": {
            "pump": {"role": "signal-source", "address": "A", "ceiling_dbm": 5.0},
            "analyser": {
                "role": "wave-receiver",
                "address": "B",
                "coherent": True,
                "source_port": 2,
                "power_up_dbm": -10.0,
                "port_damage_dbm": 26.0,
                "receiver": {"linear_dbm": -3.0, "damage_dbm": 15.0},
            },
            "meter": {
                "role": "power-meter",
                "address": "C",
                "sensor": {"linear_dbm": 33.0, "damage_dbm": 36.0, "reflection": 0.02},
            },
            "supply": {"role": "dc-supply", "address": "D"},
            "ambient": {"role": "thermometer", "address": "E"},
        },
        "parts": {
            "booster": {"kind": "amplifier", "gain_db": 30.0, "linear_dbm": 36.0, "damage_dbm": 15.0},
            "input-isolator": {"kind": "isolator", "loss_db": 0.4, "isolation_db": 25.0, "damage_dbm": 40.0},
            "coupler": {
                "kind": "coupler",
                "coupling_db": 20.0,
                "directivity_db": 37.0,
                "loss_db": 0.3,
                "damage_dbm": 47.0,
            },
            "P1": {"kind": "pad", "loss_db": 10.0, "damage_dbm": 33.0},
            "P2": {"kind": "pad", "loss_db": 10.0, "damage_dbm": 44.0},
            "P3": {"kind": "pad", "loss_db": 10.0, "damage_dbm": 33.0},
            "P4": {"kind": "pad", "loss_db": 17.0, "damage_dbm": 37.0},
            "port-isolator": {"kind": "isolator", "loss_db": 0.4, "isolation_db": 25.0, "damage_dbm": 37.0},
        },
        "signals": {
            "pump": {"instrument": "pump", "path": ["booster", "input-isolator"], "plane": "input"},
            "probe": {"instrument": "analyser", "path": ["port-isolator", "P2", "coupler"], "plane": "output"},
        },
        "receivers": {
            "incident": {
                "instrument": "analyser",
                "receiver": "R3",
                "coupler": "coupler",
                "arm": "incident",
                "path": ["P1"],
            },
            "reflected": {
                "instrument": "analyser",
                "receiver": "R4",
                "coupler": "coupler",
                "arm": "reflected",
                "path": ["P4", "P3"],
            },
        },
        "bias": {
            "gate": {
                "instrument": "supply",
                "channel": 1,
                "voltage_v": [-6.0, 0.0],
                "current_limit_a": 0.05,
                "over_voltage_v": 7.0,
                "pinch_off_v": -5.0,
            },
            "drain": {
                "instrument": "supply",
                "channel": 2,
                "voltage_v": [0.0, 30.0],
                "current_limit_a": 3.0,
                "over_voltage_v": 32.0,
                "released_below_v": 1.0,
            },
        },
        "device": {"maximum_input_dbm": 33.0, "maximum_output_dbm": 45.0},
        "standards": {
            "open": {"kind": "open", "delay_s": 3e-11, "capacitance": [5e-14, 0.0]},
            "short": {"kind": "short", "delay_s": 3e-11, "inductance": [5e-12]},
            "match": {"kind": "match", "resistance_ohm": 50.0},
            "offset-short-1": {"kind": "short", "delay_s": 6.5e-11},
            "offset-short-2": {"kind": "short", "delay_s": 9.7e-11},
        },
        "rehearsal": {"world": "R1", **rehearsal},
    }


def bias_up(world: World) -> None:
    """Gate, then drain, at this specimen's quiescent point."""
    gate_v = world.truth.quiescent_gate_v()
    world.set_supply("supply", 1, voltage_v=gate_v, current_limit_a=0.05, on=True)
    world.set_supply("supply", 2, voltage_v=28.0, current_limit_a=3.0, on=True)
