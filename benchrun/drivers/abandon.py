"""A bench that could not be opened as a whole is left with RF and drains off, as far as its instruments answer.

Whatever ran here before may have left it on, and an analyser radiates by itself after a power-up. Only an instrument
that is who the bench file says is spoken to; gates are never touched, as not everything before them can be confirmed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from contextlib import suppress
from typing import cast

from benchrun.bench.model import Bench
from benchrun.contract.roles import DcSupply, Instrument
from benchrun.errors import BenchrunError

RADIATING = ("signal-source", "wave-receiver")


def abandon(bench: Bench, drivers: Mapping[str, Callable[[], Instrument]]) -> str:
    """Switch off what radiates, then drains; return in words what is confirmed to be off.

    `drivers` open what answers at each instrument's address: they raise BenchError where that is not whom the bench
    file means. Nothing that fails keeps the others from being tried.
    """
    confirmed = ", ".join(_switched_off(bench, drivers))
    return (
        f"Nothing was switched on. {f'Confirmed off: {confirmed}' if confirmed else 'Nothing is confirmed to be off'}."
    )


def _switched_off(bench: Bench, drivers: Mapping[str, Callable[[], Instrument]]) -> Iterator[str]:
    for name, driver in drivers.items():
        if bench.role(name) in RADIATING:
            with suppress(BenchrunError):
                driver().make_safe()
                yield f"RF of {name}"
    for name, bias in bench.bias.items():
        if bias.pinch_off is None and bias.instrument in drivers:
            with suppress(BenchrunError):
                cast("DcSupply", drivers[bias.instrument]()).output(name, on=False)
                yield name
