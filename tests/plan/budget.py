"""The level budget of the example bench by hand, in plain arithmetic: nothing of the product is used."""

from __future__ import annotations

import math


def db(magnitude: float) -> float:
    return 20.0 * math.log10(magnitude)


def mag(level_db: float) -> float:
    return 10.0 ** (level_db / 20.0)


def together(*levels_dbm: float) -> float:
    return db(sum(mag(level) for level in levels_dbm))


MATCH = mag(-22.0)
HOT_REFLECTION = 0.6 + 0.2

#: Drive 30 dBm, by hand. The bench's input reflects -22 dB, the device's input everything.
DEVICE_INPUT = 30.0 - db(1.0 - MATCH)
#: Rapp, p = 2: 14.5 dB of gain, 43 dBm of saturation; then the output bench's -22 dB against 0.8.
_LINEAR = mag(DEVICE_INPUT + 14.5 - 43.0)
DEVICE_OUTPUT = 43.0 + db(_LINEAR / (1.0 + _LINEAR**4) ** 0.25) - db(1.0 - MATCH * HOT_REFLECTION)
#: What the bench sends back, seen before the main line's 0.3 dB.
SENT_BACK = DEVICE_OUTPUT - 22.0 + 0.3
#: Coupler 20 dB, and what is sent back through the directivity of 37 dB; pads 17 and 10 dB.
REFLECTED_ARM = together(DEVICE_OUTPUT, SENT_BACK - 37.0) - 20.0
REFLECTED_RECEIVER = REFLECTED_ARM - 17.0 - 10.0
#: The same in the other arm, and a pad of 10 dB.
INCIDENT_RECEIVER = together(SENT_BACK, DEVICE_OUTPUT - 37.0) - 20.0 - 10.0
#: Main line, 10 dB pad, isolator backward.
PORT = DEVICE_OUTPUT - 0.3 - 10.0 - 25.0
#: Probe at 8 dBm: isolator, pad, main line; the bench's own match against the hot reflection.
PROBE_ARRIVES = 8.0 - 0.4 - 10.0 - 0.3 - db(1.0 - MATCH * HOT_REFLECTION)
