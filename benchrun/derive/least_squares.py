"""Least squares of many small complex systems at once, one for each frequency, all in planar arrays.

Modified Gram-Schmidt with the right side as the last column: as accurate as Householder's for least squares (Bjorck,
BIT 7, 1967, mem.), and every step is one operation over the whole frequency axis.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray

#: Numbers worked on at once: so many that numpy's own time does not count, so few that they fit in a cache.
BLOCK_NUMBERS = 50_000


class Solution(NamedTuple):
    """x (n, ..., F) that minimises |A x - y|, and how independent the columns are, (..., F) between 0 and 1.

    `independence` is the smallest share of any column's length that the columns before it leave over.
    """

    x: ComplexArray
    independence: FloatArray


def least_squares(columns: ComplexArray, right: ComplexArray) -> Solution:
    """Solve A x = y for `columns` (n, N, ..., F), N >= n equations, and `right` (N, ..., F).

    Where the columns depend on each other x is no number and independence is 0 (or rounding): the caller refuses.

    >>> grid = np.arange(1.0, 4.0)
    >>> a = np.array([[[1, 1, 1], [1, 1, 1], [1, 1, 1]], [[0, 0, 0], [1, 2, 3], [2j, 1, 5]]], dtype=complex)
    >>> found = least_squares(a, 2 * a[0] - 1j * a[1])
    >>> bool(np.allclose(found.x, [[2] * 3, [-1j] * 3], rtol=0, atol=1e-14))
    True
    """
    shape = columns.shape
    columns, right = columns.reshape(*shape[:2], -1), right.reshape(shape[1], -1)
    found = Solution(np.empty((shape[0], columns.shape[-1]), np.complex128), np.empty(columns.shape[-1]))
    at_once = max(1, min(BLOCK_NUMBERS // ((shape[0] + 1) * shape[1]), columns.shape[-1]))
    memory = np.empty((2, shape[0] + 1, shape[1], at_once), np.complex128)
    with np.errstate(divide="ignore", invalid="ignore"):
        for first in range(0, columns.shape[-1], at_once):
            block = slice(first, first + at_once)
            found.x[:, block], found.independence[block] = _block(columns[..., block], right[:, block], memory)
    return Solution(found.x.reshape(shape[0], *shape[2:]), np.nan_to_num(found.independence.reshape(shape[2:])))


def _block(columns: ComplexArray, right: ComplexArray, memory: ComplexArray) -> Solution:
    """Solve for `columns` (n, N, f) and `right` (N, f) in `memory` (2, n + 1, N, at least f)."""
    n = len(columns)
    work, spare = memory[..., : right.shape[-1]]
    size = _length(columns)
    np.divide(columns, size[:, None], out=work[:n])
    work[n] = right
    left, projections = np.empty(size.shape), []
    for k in range(n):
        left[k] = _length(work[k])
        direction, rest, product = work[k] / left[k], work[k + 1 :], spare[k + 1 :]
        onto = np.sum(np.multiply(np.conj(direction), rest, out=product), axis=1)
        rest -= np.multiply(direction, onto[:, None], out=product)
        projections.append(onto)
    x = np.empty(size.shape, np.complex128)
    for k in reversed(range(n)):
        x[k] = (projections[k][-1] - np.sum(projections[k][:-1] * x[k + 1 :], axis=0)) / left[k]
    return Solution(np.asarray(x / size), np.asarray(np.min(left, axis=0)))


def _length(vectors: ComplexArray) -> FloatArray:
    """Return the length of `vectors` (..., N, f), (..., f)."""
    return np.asarray(np.sqrt(np.sum(vectors.real**2 + vectors.imag**2, axis=-2)))
