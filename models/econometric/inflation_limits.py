"""Where the log odds of inflation run off to: limits that are sure, and gains that single out a few zeros."""

from __future__ import annotations

import numpy as np
from scipy.optimize import linprog

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.design import scaled_design
from steelyard.models.separation import separating_direction

__all__ = ["FAR", "gain_of_certain_zeros", "limit_direction"]

# Log odds beyond this are on their way to a limit: the likelihood has no more than 1e-6 of itself to gain.
FAR = 14.0


def limit_direction(design: Floats, index: Floats, free: Bools, response: Floats) -> Floats | None:
    """A direction of the inflation coefficients along which the likelihood rises to a limit; None if none is sure.

    Either one that costs no observation anything: positive flows do not go up, zeros do not go down. Or, where log
    odds have run below -FAR and none beyond FAR, one that takes the inflation from those and moves no other. A
    search that has run off both ways would have to choose which zeros are always zero; there may be several such
    limits, and none is taken.
    """
    scaled = scaled_design(design[free])
    zero = response[free] == 0
    found = separating_direction(scaled.matrix, ~zero, zero)
    if found is None:
        down = index[free] < -FAR
        if not down.any() or (index[free] > FAR).any():
            return None
        found = _moving_only(scaled.matrix, down)
    if found is None:
        return None
    exact = np.where(np.abs(found) > 1e-9, found, 0.0)
    original = scaled.back @ exact
    return np.where(np.abs(original) > 1e-9 * (np.abs(scaled.back) @ np.abs(exact)), original, 0.0)


def _moving_only(matrix: Floats, down: Bools) -> Floats | None:
    """A direction that moves some observations down and does not move the rest, by a linear programme."""
    still = np.unique(matrix[~down], axis=0)
    moved = np.unique(matrix[down], axis=0)
    answer = linprog(
        np.zeros(matrix.shape[1]),
        A_ub=moved,
        b_ub=np.full(len(moved), -1.0),
        A_eq=still if len(still) else None,
        b_eq=np.zeros(len(still)) if len(still) else None,
        bounds=(None, None),
        method="highs",
    )
    return np.asarray(answer.x) if answer.status == 0 else None


def gain_of_certain_zeros(design: Floats, log_zero: Floats, response: Floats) -> tuple[int, float]:
    """What the likelihood of the plain count law gains when inflation makes some zeros certain and touches no other.

    A steep inflation index is one above a threshold and nothing below it; where only zeros lie above, each of them
    gains minus its log probability. Looked for along every column, the log mean, and the line between the centres of
    zeros and flows, both ways: not all directions, so that no gain here is no proof, but a gain is.

    Parameters
    ----------
    design : (n, k) columns of the inflation index, the constant first
    log_zero : (n,) log probability of a zero under the plain law
    response : (n,) counts, some zero and some not

    Returns
    -------
    The largest gain, and how many zeros make it.
    """
    matrix = scaled_design(design).matrix[:, 1:]
    if matrix.shape[1] == 0:
        return 0, 0.0
    zero = response == 0
    lines = [*np.eye(matrix.shape[1]), matrix[zero].mean(axis=0) - matrix[~zero].mean(axis=0)]
    finite = np.isfinite(log_zero) & (log_zero < 0)
    if finite.any():
        lines.append(np.linalg.lstsq(matrix[finite], np.log(-log_zero[finite]), rcond=None)[0])
    best = (0, 0.0)
    for line in lines:
        for along in (matrix @ line, -(matrix @ line)):
            certain = zero & (along > along[~zero].max() + 1e-9 * np.abs(along).max(initial=1.0))
            gain = float(-log_zero[certain].sum())
            best = (int(certain.sum()), gain) if gain > best[1] else best
    return best
