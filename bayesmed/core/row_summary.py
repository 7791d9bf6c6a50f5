"""Rows reduced in one pass: a triangle with the inner products of any number of columns, batch by batch.

The triangular factor of ``[1, X - s]``, with s a shift near the column means, is found by orthogonal factorisation of
small blocks and of their stacked triangles (Demmel, Grigori, Hoemmen & Langou 2012, doi:10.1137/080731992). Columns
picked from it have the inner products, hence the regressions, of the columns themselves, whatever the number of rows.
Shifting first keeps the digits that a far mean would take.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from functools import reduce

import numpy as np

from bayesmed.core.mapping import Array

BLOCK = 40
"""Rows of a block are so many times its columns: small enough for the cache, large enough to shrink."""


@dataclass(frozen=True, eq=False)
class RowSummary:
    """What rows of k columns are reduced to.

    Attributes
    ----------
    factor : array, shape (k + 1, k + 1)
        Triangular factor of ``[1, X - shift]``.
    shift : array, shape (k,)
    rows : int
    """

    factor: Array
    shift: Array
    rows: int

    def combined(self, weights: Array) -> "RowSummary":
        """Return the summary of ``X @ weights``."""
        factor = np.column_stack([self.factor[:, 0], self.factor[:, 1:] @ weights])
        return RowSummary(factor, self.shift @ weights, self.rows)

    def columns(self, chosen: Sequence[int]) -> Array:
        """Return columns with the inner products of those chosen of X, shape (k + 1, chosen)."""
        index = np.asarray(chosen, dtype=int) + 1
        return np.asarray(self.factor[:, index] + np.outer(self.factor[:, 0], self.shift[index - 1]))

    def centred(self, chosen: Sequence[int]) -> Array:
        """Return columns with the inner products of those chosen less their means, shape (k, chosen)."""
        return np.asarray(self.factor[1:, np.asarray(chosen, dtype=int) + 1])

    def means(self, chosen: Sequence[int]) -> Array:
        """Return the means of the columns chosen."""
        index = np.asarray(chosen, dtype=int)
        return np.asarray(self.shift[index] + self.factor[0, index + 1] / self.factor[0, 0])


def summarised(rows: Array, shift: Array | None = None) -> RowSummary:
    """Return the summary of an array of shape (row, k); `shift` is its column means if left out."""
    shift = np.asarray(rows.mean(axis=0)) if shift is None else shift
    matrix = np.empty((len(rows), rows.shape[1] + 1))
    matrix[:, 0] = 1.0
    np.subtract(rows, shift, out=matrix[:, 1:])
    return RowSummary(_triangle(matrix), shift, len(rows))


def joined_summary(parts: Iterable[RowSummary]) -> RowSummary:
    """Return the summary of the rows of all parts, which have the same shift."""
    return reduce(_added, parts)


def _added(one: RowSummary, other: RowSummary) -> RowSummary:
    return RowSummary(_triangle(np.vstack([one.factor, other.factor])), one.shift, one.rows + other.rows)


def _triangle(matrix: Array) -> Array:
    """Return the square triangular factor, by stacks of blocks."""
    rows, size = matrix.shape
    block = BLOCK * size
    while rows > 2 * block:
        whole = rows // block * block
        stack = np.linalg.qr(matrix[:whole].reshape(-1, block, size), mode="r")
        matrix = np.vstack([stack.reshape(-1, size), matrix[whole:]])
        rows = len(matrix)
    norm = np.linalg.norm(matrix, axis=0)
    norm[norm == 0] = 1.0
    factor = np.linalg.qr(matrix / norm, mode="r") * norm
    sign = np.where(np.diag(factor[: len(factor)]) < 0, -1.0, 1.0)
    factor = factor * sign[:, None]
    return np.vstack([factor, np.zeros((size - len(factor), size))]) if len(factor) < size else factor
