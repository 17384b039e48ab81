"""Separation: dyads that a linear index can push to its limit at no cost, so that no finite maximum exists.

An observation at the lower edge of its law (no link; a zero count) loses nothing when its index falls for
ever; one at the upper edge (a link) loses nothing when it rises. If some direction of the coefficients moves
no observation the wrong way, and no observation that sits inside its range at all, the likelihood grows along
it without end. The dyads that move are separated: they are fixed at their limit, and the rest is fitted.

Sources: Santos Silva & Tenreyro (2010); Correia, Guimaraes & Zylkin (2019).
"""

from __future__ import annotations

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
    (r,) direction with entries in [-1, 1], or None where the maximum is finite. The direction moves as many
    observations as the linear programme finds; take them out and ask again for the rest.

    Raises
    ------
    ModelError : the linear programme could not be solved
    """
    inside = ~(lower | upper)
    # Observations inside their range must not move, which leaves the null space of their columns; the
    # triangular factor has the same null space and few rows.
    triangle = qr(design[inside], mode="r")[0][: design.shape[1]]
    free = null_space(triangle, rcond=1e-10) if inside.any() else np.eye(design.shape[1])
    if free.shape[1] == 0:
        return None
    sign = np.where(upper, 1.0, -1.0)[~inside]
    rows = np.unique((design[~inside] * sign[:, None]) @ free, axis=0)
    answer = linprog(
        -rows.sum(axis=0),
        A_ub=np.vstack([-rows, free, -free]),
        b_ub=np.concatenate([np.zeros(len(rows)), np.ones(2 * len(free))]),
        bounds=(None, None),
        method="highs",
    )
    if answer.status != 0:
        raise ModelError(f"the search for separated dyads failed: {answer.message}")
    if not (rows @ answer.x > MOVES).any():
        return None
    return np.asarray(free @ answer.x)
