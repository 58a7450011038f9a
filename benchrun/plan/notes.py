"""What else the levels tell beforehand: the probe above noise, and figures of the bench that cannot be."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping

from benchrun.bench import Bench
from benchrun.bench.parts import Coupler
from benchrun.bench.ratios import RatioTable
from benchrun.plan.noise import main_line_loss_db, scatter, skirt_dbm, thermal_floor_dbm
from benchrun.quantities import show

#: A skirt this far below the probe is not seen, in dB.
UNSEEN_DB = 40.0
#: The bandwidth that the bench file's noise floors are for.
FLOOR_HZ = 1e3


def notes_of(
    bench: Bench, bandwidth_hz: float, lowest: Mapping[str, float], highest: Mapping[str, float]
) -> Iterator[str]:
    """Yield notes.

    `lowest` is the lowest level (dBm) at each receiver of the signal that its coupler samples; `highest` the highest of
    other signals there at the same time.
    """
    yield from _floor(bench, bandwidth_hz, lowest)
    yield from _skirt(bandwidth_hz, lowest, highest)
    yield from _impossible(bench)


def _floor(bench: Bench, bandwidth_hz: float, lowest: Mapping[str, float]) -> Iterator[str]:
    floors = {name: _floor_dbm(bench, name, bandwidth_hz) for name in lowest}
    above = {name: lowest[name] - floor for name, floor in floors.items() if floor is not None}
    if above:
        weakest = min(above, key=above.__getitem__)
        found = scatter(above[weakest])
        yield (
            f"Where the probe is weakest, at receiver {weakest}, it is {above[weakest]:.0f} dB above the floor in "
            f"{show(bandwidth_hz, 'frequency', 3)}: it scatters by {found.magnitude_db:.1g} dB and "
            f"{found.phase_deg:.1g} deg."
        )


def _skirt(bandwidth_hz: float, lowest: Mapping[str, float], highest: Mapping[str, float]) -> Iterator[str]:
    under = {name: highest[name] - lowest[name] for name in lowest.keys() & highest.keys()}
    if under:
        hardest = max(under, key=under.__getitem__)
        bound = lowest[hardest] - UNSEEN_DB - skirt_dbm(highest[hardest], 0.0, bandwidth_hz)
        yield (
            f"At receiver {hardest} the pump is up to {under[hardest]:.0f} dB above the probe: its noise stays "
            f"{UNSEEN_DB:.0f} dB below the probe where it is under {bound:.0f} dBc/Hz at the probe's distance."
        )


def _floor_dbm(bench: Bench, receiver: str, bandwidth_hz: float) -> float | None:
    own = bench.instruments[bench.receivers[receiver].instrument].receiver
    if own is None or own.floor is None:
        return None
    return own.floor + 10.0 * math.log10(bandwidth_hz / FLOOR_HZ)


def _least_loss_db(part: Coupler) -> float:
    return min(part.loss.ratio_db) if isinstance(part.loss, RatioTable) else part.loss


def _impossible(bench: Bench) -> Iterator[str]:
    """Yield a note for each figure of the bench file that physics does not allow."""
    for name, part in bench.parts.items():
        if isinstance(part, Coupler):
            least_db, loss_db = main_line_loss_db(part.coupling), _least_loss_db(part)
            if loss_db < least_db - 0.001:
                yield (
                    f"Coupler {name} couples out {part.coupling:g} dB and so loses {least_db:.3f} dB at least; the "
                    f"bench file says {loss_db:.3f} dB. Correct its loss."
                )
    thermal = thermal_floor_dbm(FLOOR_HZ)
    for name, instrument in bench.instruments.items():
        own = instrument.receiver
        if own is not None and own.floor is not None and own.floor < thermal:
            yield (
                f"Receivers of {name}: a floor of {own.floor:g} dBm in 1 kHz is below thermal noise, "
                f"{thermal:.1f} dBm. Correct it in the bench file."
            )
