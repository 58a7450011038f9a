"""The simulated bench: one world, five kinds of instrument, reached in this process or over loopback.

Imports nothing of benchrun, which finds it through the entry point group benchrun.rehearsal and calls open_in_process,
open_channel or serve.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from .channel import ChannelRehearsal
    from .in_process import InProcessRehearsal
    from .servers import ServedBench


def open_in_process(wiring: Mapping[str, Any], *, seed: int, real_time: bool = False) -> InProcessRehearsal:
    """Build a world in this process. Raises ValueError for a wiring that cannot be built."""
    from .in_process import InProcessRehearsal

    return InProcessRehearsal(wiring, seed=seed, real_time=real_time)


def open_channel(address: str, *, real_time: bool = False) -> ChannelRehearsal:
    """Join a served bench by host:port of its rehearsal channel; starts its world anew at time 0. Raises OSError."""
    from .channel import ChannelRehearsal

    return ChannelRehearsal(address, real_time=real_time)


def serve(wiring: Mapping[str, Any], *, seed: int) -> ServedBench:
    """Serve a world on loopback until close()."""
    from .servers import ServedBench

    return ServedBench(wiring, seed=seed)
