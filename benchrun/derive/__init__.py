"""The derive room: from raw waves to corrected ones, and from these to what the device does. Pure numpy, no I/O."""

from benchrun.derive.one_path import OnePathTerms, Response, solve_one_path
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import Scattering, Waves, flush_thru
from benchrun.derive.switch_terms import add_switch_terms, from_excitations, read_switch_terms, remove_switch_terms
from benchrun.derive.two_port import TwoPortTerms, WaveCorrection
from benchrun.derive.two_port_lines import line_phases, solve_multiline, solve_trl
from benchrun.derive.two_port_solve import solve_standards, solve_thru, solve_unknown_thru

__all__ = [
    "ErrorTerms",
    "OnePathTerms",
    "Response",
    "Scattering",
    "TwoPortTerms",
    "WaveCorrection",
    "Waves",
    "add_switch_terms",
    "flush_thru",
    "from_excitations",
    "line_phases",
    "read_switch_terms",
    "remove_switch_terms",
    "solve_multiline",
    "solve_one_path",
    "solve_standards",
    "solve_thru",
    "solve_trl",
    "solve_unknown_thru",
]
