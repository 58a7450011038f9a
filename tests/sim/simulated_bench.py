"""The wiring document of the balloon driver's bench, written out: what Bench.wiring() would give for the example."""

from __future__ import annotations

from typing import Any


def balloon_wiring(*, coherent: bool = True) -> dict[str, Any]:
    """Return a fresh copy."""
    return {
        "instruments": {
            "pump": {"role": "signal-source", "address": "TCPIP0::192.0.2.21::hislip0::INSTR", "ceiling_dbm": 5.0},
            "analyser": {
                "role": "wave-receiver",
                "address": "TCPIP0::192.0.2.22::hislip0::INSTR",
                "ceiling_dbm": 10.0,
                "coherent": coherent,
                "source_port": 2,
                "power_up_dbm": -10.0,
                "port_damage_dbm": 26.0,
                "receiver": {"linear_dbm": -3.0, "damage_dbm": 15.0, "floor_dbm": -110.0},
            },
            "meter": {
                "role": "power-meter",
                "address": "USB0::0x1234::0x0001::00017::INSTR",
                "sensor": {"linear_dbm": 33.0, "damage_dbm": 36.0, "reflection": 0.02},
            },
            "supply": {"role": "dc-supply", "address": "TCPIP0::192.0.2.24::5025::SOCKET"},
            "ambient": {"role": "thermometer", "address": "GPIB0::7::INSTR"},
        },
        "parts": {
            "booster": {"kind": "amplifier", "gain_db": 30.0, "linear_dbm": 36.0, "damage_dbm": 15.0},
            "input-isolator": {"kind": "isolator", "loss_db": 0.4, "isolation_db": 25.0, "damage_dbm": 40.0},
            "coupler": {"kind": "coupler", "coupling_db": 20.0, "directivity_db": 37.0, "loss_db": 0.3},
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
                "instrument": "analyser", "receiver": "R3", "coupler": "coupler", "arm": "incident", "path": ["P1"],
            },
            "reflected": {
                "instrument": "analyser", "receiver": "R4", "coupler": "coupler", "arm": "reflected",
                "path": ["P4", "P3"],
            },
        },
        "bias": {
            "gate": {
                "instrument": "supply", "channel": 1, "voltage_v": [-6.0, 0.0], "current_limit_a": 0.05,
                "over_voltage_v": 7.0, "pinch_off_v": -5.0,
            },
            "drain": {
                "instrument": "supply", "channel": 2, "voltage_v": [0.0, 30.0], "current_limit_a": 3.0,
                "over_voltage_v": 32.0, "released_below_v": 1.0,
            },
        },
        "device": {"maximum_input_dbm": 33.0, "maximum_output_dbm": 45.0},
        "standards": {
            "open": {"kind": "open", "delay_s": 3e-11, "capacitance": [5e-14, 0.0]},
            "short": {"kind": "short", "delay_s": 3e-11, "inductance": [5e-12]},
            "match": {"kind": "match", "resistance_ohm": 50.0},
        },
        "rehearsal": {"world": "R1"},
    }  # fmt: skip
