"""An index likelihood as a function of all scaled coefficients, worked through in blocks of rows."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import reduce

import numpy as np

from steelyard.datasets.arrays import Floats, Integers
from steelyard.models.index_protocol import IndexDerivatives, IndexLikelihood
from steelyard.models.solvers import Slope, newton_maximise

__all__ = ["SAMPLE_FROM", "IndexObjective", "even_rows", "good_start"]

# A block's arrays stay in the processor's cache, and no array of the size of the data is made on the way.
ROWS_IN_A_BLOCK = 2**16
# From here on a fit to a sample is a cheaper way to the neighbourhood of the maximum than the first steps of a
# fit to everything.
SAMPLE_FROM = 60_000
SAMPLE_ROWS = 8_000
GOLDEN = 0.6180339887498949


@dataclass(frozen=True, eq=False)
class IndexObjective:
    """Blocks of observations, each a likelihood of its own rows and its rows of the designs.

    Coefficients stand index after index.
    """

    blocks: tuple[tuple[IndexLikelihood, tuple[Floats, ...]], ...]

    @classmethod
    def of(cls, likelihood: IndexLikelihood, matrices: Sequence[Floats]) -> IndexObjective:
        """The objective of n observations and m designs (n, k)."""
        n = len(matrices[0])
        if n <= ROWS_IN_A_BLOCK:
            return cls(((likelihood, tuple(matrices)),))
        cuts = [slice(first, first + ROWS_IN_A_BLOCK) for first in range(0, n, ROWS_IN_A_BLOCK)]
        return cls(tuple((likelihood.restricted(cut), tuple(m[cut] for m in matrices)) for cut in cuts))

    def _indices(self, point: Floats, matrices: Sequence[Floats]) -> list[Floats]:
        ends = np.cumsum([m.shape[1] for m in matrices])[:-1]
        return [m @ part for m, part in zip(matrices, np.split(point, ends), strict=True)]

    def value(self, point: Floats) -> float:
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            return float(np.sum([part.value(self._indices(point, m)) for part, m in self.blocks]))

    def movement(self, step: Floats) -> float:
        changes = (change for _, m in self.blocks for change in self._indices(step, m))
        return max(float(np.abs(change).max(initial=0.0)) for change in changes)

    def scores(self, point: Floats) -> Floats:
        """(n, k) gradient of each observation's log-likelihood."""
        rows = []
        for part, matrices in self.blocks:
            first = part.derivatives(self._indices(point, matrices)).first
            rows.append(np.hstack([f[:, None] * m for f, m in zip(first, matrices, strict=True)]))
        return np.vstack(rows)

    def slope(self, point: Floats) -> Slope:
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            slopes = (_block_slope(part.derivatives(self._indices(point, m)), m) for part, m in self.blocks)
            return reduce(_added, slopes)


def _added(one: Slope, other: Slope) -> Slope:
    return Slope(one.gradient + other.gradient, one.information + other.information, one.scale + other.scale)


def _block_slope(found: IndexDerivatives, matrices: Sequence[Floats]) -> Slope:
    """Chain rule from indices to coefficients."""
    pairs = list(zip(matrices, found.first, strict=True))
    gradient = np.concatenate([m.T @ f for m, f in pairs])
    scale = np.concatenate([np.abs(m).T @ np.abs(f) for m, f in pairs])
    starts = np.cumsum([0, *(m.shape[1] for m in matrices)])
    information = np.empty((len(gradient), len(gradient)))
    for i, a in enumerate(matrices):
        rows = slice(starts[i], starts[i + 1])
        for j, b in enumerate(matrices[i:], start=i):
            columns = slice(starts[j], starts[j + 1])
            block = -(a.T * found.second[i, j]) @ b
            information[rows, columns] = block
            information[columns, rows] = block.T
    return Slope(gradient, information, scale)


def good_start(likelihood: IndexLikelihood, matrices: Sequence[Floats]) -> Floats:
    """Where to start: the likelihood's own start, or for many rows the maximum on an even sample of them.

    The sample only saves steps. Whether it converged is no evidence, and the fit to all rows is certified by
    itself.
    """
    n = len(matrices[0])
    if n >= SAMPLE_FROM:
        rows = even_rows(n, SAMPLE_ROWS)
        some, few = likelihood.restricted(rows), [m[rows] for m in matrices]
        if all(np.linalg.matrix_rank(m) == m.shape[1] for m in few):
            maximum = newton_maximise(IndexObjective.of(some, few), some.start(few))
            if maximum.convergence.converged:
                return maximum.point
    return likelihood.start(matrices)


def even_rows(n: int, most: int) -> Integers:
    """Rows spread evenly, in step with no period that the order of the rows may have."""
    return np.unique((n * np.modf(GOLDEN * np.arange(1, most + 1))[0]).astype(np.int64))
