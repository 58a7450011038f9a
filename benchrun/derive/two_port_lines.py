"""The eight terms of a two-port from TRL and multiline, by scikit-rf's solvers.

The raw ratios b = M a come from switch_terms, so scikit-rf is given them without switch terms. The reference
impedance that results is that of the lines, unless it is stated. Source: METHODS section 2; Engen, Hoer, IEEE T-MTT
27(12) 1979; DeGroot, Jargon, Marks, Multiline TRL revealed, 60th ARFTG 2002.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import Scattering, refuse_where, require_numbers
from benchrun.derive.two_port import TwoPortTerms
from benchrun.errors import DataSetError

if TYPE_CHECKING:
    from skrf import Network

#: A line must differ from the thru by this much from every multiple of 180 degrees; common practice, no source, asks
#: for 20 to 160 degrees, and below 10 no number is given.
LEAST_LINE_DEG = 10.0


def solve_trl(
    thru: Scattering,
    reflect: Scattering,
    lines: Sequence[Scattering],
    frequency_hz: FloatArray,
    *,
    reflect_sign: int = -1,
    line_guesses: Sequence[npt.ArrayLike | None] = (),
) -> TwoPortTerms:
    """Return the terms from a flush thru, one unknown reflect alike at both ports, and one or more unknown lines.

    All standards are raw ratios b = M a (F,). `reflect_sign` is -1 near a short and +1 near an open; `line_guesses`
    (one for each line) are rough S21 (F,) of the lines, None for about -90 degrees: they choose the root only.
    Raises DataSetError where no line differs from the thru by more than LEAST_LINE_DEG from 0 or 180 degrees.
    """
    _require_lines(thru, lines, frequency_hz)
    if reflect_sign not in {-1, 1}:
        raise DataSetError(f"the reflect's sign is {reflect_sign}: -1 (near a short) or +1 (near an open) is expected.")
    guesses = list(line_guesses) or [None] * len(lines)
    if len(guesses) != len(lines):
        raise DataSetError(f"{len(guesses)} guesses were given for {len(lines)} lines: give one for each, or none.")
    grid = np.asarray(frequency_hz, np.float64)
    ideals = [None, reflect_sign, *(None if g is None else _network(_line(g, grid), grid) for g in guesses)]

    def build() -> Any:
        from skrf.calibration import TRL

        return TRL(measured=[_network(m, grid) for m in (thru, reflect, *lines)], ideals=ideals)

    return _solved(build, grid, reflect)


def solve_multiline(
    thru: Scattering,
    reflect: Scattering,
    lines: Sequence[Scattering],
    frequency_hz: FloatArray,
    lengths_m: Sequence[float],
    *,
    reflect_guess: complex = -1.0,
    permittivity_guess: complex = 1.0,
    line_impedance_ohm: complex | None = None,
    reference_ohm: float = 50.0,
) -> TwoPortTerms:
    """Return the terms from a thru, a reflect and lines of known length by the weighted multiline solution.

    `lengths_m` are the lengths of thru and lines, in their order, in metre; the planes are at the ends of the thru.
    `permittivity_guess` is the effective one (its imaginary part the loss at 1 GHz, negative). With
    `line_impedance_ohm` the terms are referred to `reference_ohm`, else to the lines' own impedance. Raises
    DataSetError as solve_trl, and where the lengths do not fit the lines.
    """
    _require_lines(thru, lines, frequency_hz)
    if len(lengths_m) != len(lines) + 1 or not np.all(np.isfinite(lengths_m)):
        raise DataSetError(f"{len(lengths_m)} lengths were given: one for the thru and one for each line is expected.")
    grid = np.asarray(frequency_hz, np.float64)

    def build() -> Any:
        from skrf.calibration import NISTMultilineTRL

        return NISTMultilineTRL(
            [_network(m, grid) for m in (thru, reflect, *lines)],
            [reflect_guess],
            list(lengths_m),
            er_est=permittivity_guess,
            z0_line=line_impedance_ohm,
            z0_ref=reference_ohm,
        )

    return _solved(build, grid, reflect)


def line_phases(thru: Scattering, line: Scattering) -> FloatArray:
    """Return by how many degrees (F,) a raw `line` differs from the raw `thru`, 0 to 180, whatever the ports do.

    The line seen through the ports is similar to the line itself: M_line M_thru^-1 as cascade matrices has the
    eigenvalues exp(-gamma l) and exp(gamma l). Their half difference in phase is what is returned. Source: Engen, Hoer.
    """
    product = _cascade(line) @ np.linalg.inv(_cascade(thru))
    values = np.linalg.eigvals(product)
    return np.asarray(np.abs(np.angle(values[..., 0] / values[..., 1], deg=True)) / 2.0)


def _cascade(m: Scattering) -> ComplexArray:
    """Return the cascade matrices (F, 2, 2) of (b1, a1) over (a2, b2)."""
    return Scattering(-m.determinant() / m.s21, m.s11 / m.s21, -m.s22 / m.s21, 1.0 / m.s21).matrices()


def _require_lines(thru: Scattering, lines: Sequence[Scattering], frequency_hz: FloatArray) -> None:
    """Refuse unless at every frequency some line is far enough from 0 and 180 degrees against the thru."""
    if not lines:
        raise DataSetError("there is no line: TRL needs a thru, a reflect and at least one line.")
    for m in (thru, *lines):
        require_numbers("a standard", frequency_hz, *m)
        nothing = (m.s21 == 0.0) | (m.s12 == 0.0)
        refuse_where(nothing, frequency_hz, "nothing came through at {at}: were thru and lines connected?")
    phases = np.stack([line_phases(thru, line) for line in lines])
    refuse_where(
        ~(np.max(phases, axis=0) > LEAST_LINE_DEG),
        frequency_hz,
        f"no line differs from the thru by more than {LEAST_LINE_DEG:g} degrees (apart from multiples of 180) at "
        "{at}: take a line of another length there.",
    )


def _line(s21: npt.ArrayLike, grid: FloatArray) -> Scattering:
    through, none = np.asarray(s21, np.complex128) * np.ones(grid.size), np.zeros(grid.size, complex)
    return Scattering(none, through, through, none)


def _network(m: Scattering, grid: FloatArray) -> Network:
    from skrf import Network

    return Network(f=grid, f_unit="hz", s=m.matrices())


def _solved(build: Callable[[], Any], grid: FloatArray, reflect: Scattering) -> TwoPortTerms:
    """Run scikit-rf's solver and return its terms; whatever it stumbles over becomes a DataSetError."""
    require_numbers("the reflect", grid, *reflect)
    try:
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter("ignore")  # what it warns of (no switch terms, line phases) is taken care of here
            solver = build()
            solver.run()
            terms = solver.coefs
    except Exception as error:  # its solver raises whatever numpy meets
        raise DataSetError(f"thru, reflect and lines do not make a calibration ({error}): read them again.") from error
    names = ("directivity", "source match", "reflection tracking")
    ports = [ErrorTerms(*(np.array(terms[f"{way} {name}"]) for name in names)) for way in ("forward", "reverse")]
    k = np.array(terms["k"])
    require_numbers("the solution", grid, ports[0].e10e01, ports[1].e10e01, k)
    return TwoPortTerms(ports[0], ports[1], k, grid)
