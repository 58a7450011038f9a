"""Counter-based randomness: the same key gives the same numbers, whatever was drawn before."""

from __future__ import annotations

import math
from hashlib import blake2b

import numpy as np
import numpy.typing as npt

Key = str | bytes | int | float


def stream(seed: int, *key: Key) -> np.random.Generator:
    """Return a generator (Philox, keyed by a hash) that depends on the seed and the key only."""
    digest = blake2b(repr((seed, key)).encode(), digest_size=16).digest()
    return np.random.Generator(np.random.Philox(key=int.from_bytes(digest, "little")))


def normal(seed: int, *key: Key) -> float:
    """One standard normal number."""
    return float(stream(seed, *key).standard_normal())


def sign(seed: int, *key: Key) -> float:
    """-1.0 or 1.0, equally likely."""
    return 1.0 if stream(seed, *key).random() < 0.5 else -1.0


def angle_rad(seed: int, *key: Key) -> float:
    """Angle between 0 and 2 pi, equally distributed."""
    return float(2.0 * np.pi * stream(seed, *key).random())


def phasor(seed: int, *key: Key) -> complex:
    """Complex number of magnitude 1 and random angle."""
    return complex(np.exp(1j * angle_rad(seed, *key)))


def complex_normal(seed: int, *key: Key) -> complex:
    """Circular complex normal number with unit mean square."""
    real, imaginary = stream(seed, *key).standard_normal(2)
    return complex(real, imaginary) * math.sqrt(0.5)


def complex_normals(generator: np.random.Generator, *shape: int) -> npt.NDArray[np.complex128]:
    """Circular complex normal numbers with unit mean square."""
    numbers: npt.NDArray[np.complex128] = generator.standard_normal((*shape, 2)).view(np.complex128)[..., 0]
    return numbers * math.sqrt(0.5)
