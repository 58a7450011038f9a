"""The simulated bench's physics: what the sources put in, what the device does, what the receivers see, and the truth.

Nothing here knows of SCPI, VISA or benchrun. Instruments are built on top of `World`.
"""

from __future__ import annotations

from .inspection import Damage
from .reference import reference_sha256, reference_world
from .truth import ErrorTerms, HotTruth, Truth
from .world import Event, World

__all__ = ["Damage", "ErrorTerms", "Event", "HotTruth", "Truth", "World", "reference_sha256", "reference_world"]
