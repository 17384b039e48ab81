"""Regression columns put on one scale, and those that others already contain set aside."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard.datasets.arrays import Floats, Integers

__all__ = ["ALIAS_LIMIT", "ScaledDesign", "scaled_design"]

ALIAS_LIMIT = 1e-9


@dataclass(frozen=True, eq=False)
class ScaledDesign:
    """Columns of mean 0 and spread 1 (the constant apart) that span what the original columns span.

    Attributes
    ----------
    matrix : (n, r) scaled columns that are kept
    kept : (r,) their positions among the k original columns
    back : (k, r) so that original coefficients = back @ scaled coefficients, 0 for columns set aside
    """

    matrix: Floats
    kept: Integers
    back: Floats

    @property
    def aliased(self) -> tuple[int, ...]:
        """Positions of the original columns that earlier columns already contain."""
        return tuple(sorted(set(range(self.back.shape[0])) - set(self.kept.tolist())))


def scaled_design(design: Floats) -> ScaledDesign:
    """Scale an (n, k) design; columns are centred only when the first is the constant 1.

    A column is set aside when less than 1e-9 of its length is left after the columns before it are taken
    out, so the order of covariates decides which of two equal ones is estimated. Columns far from zero (a
    year, a date in seconds) come rounded; what is left must then also exceed that rounding.
    """
    n, k = design.shape
    has_constant = k > 0 and bool((design[:, 0] == 1.0).all())
    centre = np.zeros(k)
    matrix, spread = np.empty((n, k), order="F"), np.zeros(k)
    for column in range(k):
        values = matrix[:, column]
        values[:] = design[:, column]
        if has_constant and column:
            centre[column] = values.mean()
            values -= centre[column]
        spread[column] = np.sqrt(values @ values / n) if n else 0.0
    # A constant column centred leaves rounding noise; judge it against its own level.
    negligible = spread <= 1e-12 * np.maximum(np.abs(centre), 1e-300)
    scale = np.where(negligible, 1.0, spread)
    for column in range(k):
        if negligible[column]:
            matrix[:, column] = 0.0
        else:
            matrix[:, column] /= scale[column]
    rounding = 4.0 * np.finfo(np.float64).eps * np.abs(design).max(axis=0, initial=0.0) / scale
    kept = _independent(matrix, rounding)
    back = np.zeros((k, len(kept)))
    back[kept, np.arange(len(kept))] = 1.0 / scale[kept]
    if has_constant:
        back[0] -= centre[kept] / scale[kept]
    return ScaledDesign(matrix if len(kept) == k else np.asfortranarray(matrix[:, kept]), kept, back)


def _independent(matrix: Floats, rounding: Floats) -> Integers:
    """Positions of the columns that are not combinations of earlier ones; `rounding` is (k,) for an entry."""
    n, k = matrix.shape
    if n and k and _surely_independent(matrix, rounding):
        return np.arange(k)
    basis = np.empty((n, 0))
    kept: list[int] = []
    for column in range(k):
        vector = matrix[:, column]
        length = float(np.linalg.norm(vector))
        # Two passes of projection, since one loses accuracy on nearly dependent columns.
        rest = vector - basis @ (basis.T @ vector)
        rest -= basis @ (basis.T @ rest)
        left = float(np.linalg.norm(rest))
        noise = float(np.max(rounding[[*kept, column]]))
        if length > 0 and left > max(ALIAS_LIMIT, noise) * length:
            kept.append(column)
            basis = np.column_stack([basis, rest / left])
    return np.array(kept, dtype=np.int64)


def _surely_independent(matrix: Floats, rounding: Floats) -> bool:
    """Whether the correlations alone show that every column keeps at least a hundredth of its length.

    The squared part that is left of a column is at least the smallest eigenvalue of the correlations, so that
    most designs need no projections.
    """
    squares = matrix.T @ matrix
    lengths = np.sqrt(np.diag(squares))
    if (lengths == 0).any() or float(rounding.max(initial=0.0)) > 1e-3:
        return False
    return float(np.linalg.eigvalsh(squares / np.outer(lengths, lengths))[0]) > 1e-4
