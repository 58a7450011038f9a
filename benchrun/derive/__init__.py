"""The derive room: from raw waves to corrected ones, and from these to what the device does. Pure numpy, no I/O."""

from benchrun.derive.both_ports import (
    HotTwoPort,
    drive_slope,
    each_sideband,
    free_of_port_1,
    from_probe_states,
    with_drive_sweep,
)
from benchrun.derive.contributions import (
    mismatch_limits,
    mismatch_uncertainty,
    noise_of_ratio,
    reading_limits_db,
    residual_error,
)
from benchrun.derive.hot_uncertainty import HotReflection, RawSidebands, hot_reflection
from benchrun.derive.one_path import OnePathTerms, Response, solve_one_path
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.one_port_uncertainty import reflection_spread, sensitivity, terms_spread
from benchrun.derive.scattering import Scattering, Waves, flush_thru
from benchrun.derive.stability import Sidebands, cold_stability, encirclements, margin, sideband_determinant
from benchrun.derive.switch_terms import add_switch_terms, from_excitations, read_switch_terms, remove_switch_terms
from benchrun.derive.two_port import TwoPortTerms, WaveCorrection
from benchrun.derive.two_port_lines import line_phases, solve_multiline, solve_trl
from benchrun.derive.two_port_solve import solve_standards, solve_thru, solve_unknown_thru
from benchrun.derive.uncertainty import (
    Spread,
    coverage_factor,
    derivatives,
    ellipse,
    inside,
    monte_carlo,
    polar,
    propagate,
    real_errors,
    round_errors,
    together,
)

__all__ = [
    "ErrorTerms",
    "HotReflection",
    "HotTwoPort",
    "OnePathTerms",
    "RawSidebands",
    "Response",
    "Scattering",
    "Sidebands",
    "Spread",
    "TwoPortTerms",
    "WaveCorrection",
    "Waves",
    "add_switch_terms",
    "cold_stability",
    "coverage_factor",
    "derivatives",
    "drive_slope",
    "each_sideband",
    "ellipse",
    "encirclements",
    "flush_thru",
    "free_of_port_1",
    "from_excitations",
    "from_probe_states",
    "hot_reflection",
    "inside",
    "line_phases",
    "margin",
    "mismatch_limits",
    "mismatch_uncertainty",
    "monte_carlo",
    "noise_of_ratio",
    "polar",
    "propagate",
    "read_switch_terms",
    "reading_limits_db",
    "real_errors",
    "reflection_spread",
    "remove_switch_terms",
    "residual_error",
    "round_errors",
    "sensitivity",
    "sideband_determinant",
    "solve_multiline",
    "solve_one_path",
    "solve_standards",
    "solve_thru",
    "solve_trl",
    "solve_unknown_thru",
    "terms_spread",
    "together",
    "with_drive_sweep",
]
