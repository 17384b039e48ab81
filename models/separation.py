"""Separation: dyads that a linear index can push to its limit at no cost, so that no finite maximum exists.

An observation at the lower edge of its law (no link; a zero count) loses nothing when its index falls for
ever; one at the upper edge (a link) loses nothing when it rises. If some direction of the coefficients moves
no observation the wrong way, and no observation that sits inside its range at all, the likelihood grows along
it without end. The dyads that move are separated: they are fixed at their limit, and the rest is fitted.

Sources: Santos Silva & Tenreyro (2010); Correia, Guimaraes & Zylkin (2019).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy.linalg import null_space, qr
from scipy.optimize import linprog

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.errors import ModelError

__all__ = ["separating_direction"]

MOVES = 1e-7


def separating_direction(design: Floats, lower: Bools, upper: Bools) -> Floats | None:
    """A direction along which the likelihood never falls and some observation is pushed to its limit.

    Parameters
    ----------
    design : (n, r) columns of about unit scale and full rank
    lower, upper : (n,) which observations sit at the lower or the upper edge of their law

    Returns
    -------
    (r,) direction with entries in [-1, 1], or None where the maximum is finite. It moves the observations as
    far in total as any such direction does, and among those it is the sparsest, so that a prediction is not
    sent to its limit by a column that the data do not need: where every dyad is linked, the constant alone
    moves. Take out what it moves and ask again for the rest.

    Raises
    ------
    ModelError : the linear programme could not be solved
    """
    inside = ~(lower | upper)
    # Observations inside their range must not move, which leaves the null space of their columns; the
    # triangular factor has the same null space and few rows.
    if _pinned(design, inside):
        return None
    triangle = qr(design[inside], mode="r")[0][: design.shape[1]]
    free = null_space(triangle, rcond=1e-10) if inside.any() else np.eye(design.shape[1])
    if free.shape[1] == 0:
        return None
    sign = np.where(upper, 1.0, -1.0)[~inside]
    rows = np.unique((design[~inside] * sign[:, None]) @ free, axis=0)
    farthest = _solved(
        -rows.sum(axis=0),
        np.vstack([-rows, free, -free]),
        np.concatenate([np.zeros(len(rows)), np.ones(2 * len(free))]),
    )
    if not (rows @ farthest > MOVES).any():
        return None
    sparsest = _sparsest(rows, free, float((rows @ farthest).sum()))
    return np.asarray(free @ (sparsest if (rows @ sparsest > MOVES).any() else farthest))


def _pinned(design: Floats, inside: Bools) -> bool:
    """Whether observations that must not move surely leave no direction: their columns are far from dependent."""
    if int(inside.sum()) < design.shape[1]:
        return False
    values = np.linalg.eigvalsh((design.T * inside) @ design)
    return bool(values[0] > 1e-6 * values[-1])


def _sparsest(rows: Floats, free: Floats, total: float) -> Floats:
    """(f,) the direction of least absolute sum among those that move no row back and all rows by `total`."""
    n_free, n_columns = free.shape[1], len(free)
    own = np.eye(n_columns)
    moves = np.hstack([rows, np.zeros((len(rows), n_columns))])
    limits = np.vstack(
        [-moves, -moves.sum(axis=0)[None, :], np.hstack([free, -own]), np.hstack([-free, -own])]
    )
    bounds = np.zeros(len(limits))
    bounds[len(rows)] = -total * (1.0 - 1e-9)
    cost = np.concatenate([np.zeros(n_free), np.ones(n_columns)])
    ranges = [(None, None)] * n_free + [(0.0, 1.0)] * n_columns
    return _solved(cost, limits, bounds, ranges)[:n_free]


def _solved(
    cost: Floats,
    limits: Floats,
    bounds: Floats,
    ranges: Sequence[tuple[float | None, float | None]] = ((None, None),),
) -> Floats:
    """The point of least cost with limits @ point <= bounds, each coordinate within its range."""
    answer = linprog(cost, A_ub=limits, b_ub=bounds, bounds=ranges, method="highs")
    if answer.status != 0:
        raise ModelError(f"the search for separated dyads failed: {answer.message}")
    return np.asarray(answer.x)
