"""Least squares of many small complex systems at once, one for each frequency, all in planar arrays.

Modified Gram-Schmidt with the right side as the last column: as accurate as Householder's for least squares (Bjorck,
BIT 7, 1967, mem.), and every step is one operation over the whole frequency axis.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray


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
    n = len(columns)
    size = np.sqrt(np.sum(np.abs(columns) ** 2, axis=1))
    with np.errstate(divide="ignore", invalid="ignore"):
        work = np.concatenate([columns / size[:, None], right[None]])
        left = np.empty(size.shape)
        projections: list[ComplexArray] = []
        for k in range(n):
            left[k] = np.sqrt(np.sum(np.abs(work[k]) ** 2, axis=0))
            direction = work[k] / left[k]
            onto = np.sum(np.conj(direction) * work[k + 1 :], axis=1)
            work[k + 1 :] -= direction * onto[:, None]
            projections.append(onto)
        x = np.empty(size.shape, np.complex128)
        for k in reversed(range(n)):
            rest = projections[k][-1] - np.sum(projections[k][:-1] * x[k + 1 :], axis=0)
            x[k] = rest / left[k]
        return Solution(np.asarray(x / size), np.nan_to_num(np.min(left, axis=0)))
