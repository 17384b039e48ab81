"""RESET: do powers of the fitted index add anything to a regression?"""

from __future__ import annotations

import numpy as np
from scipy.special import fdtrc

from steelyard.benchmark.specification.finding import INDEPENDENT, Finding, not_computed
from steelyard.datasets import Floats
from steelyard.models.design import scaled_design

__all__ = ["reset_least_squares", "standardised_square"]


def reset_least_squares(response: Floats, design: Floats) -> Finding:
    """F test of the square and the cube of the fitted values in a least-squares regression.

    Parameters
    ----------
    response : (n,) as regressed (logs, for a log-linear regression)
    design : (n, k) with a constant first; columns that earlier ones contain are dropped

    References
    ----------
    .. [1] Ramsey (1969), Journal of the Royal Statistical Society B 31.
    """
    against = f"square and cube of the fitted log (F); {INDEPENDENT}"
    columns = scaled_design(design).matrix
    fitted = _projection(columns, response)
    spread = float(fitted.std())
    if spread <= 1e-9 * max(1.0, float(np.abs(fitted).max())):
        return not_computed(against, "the fitted values do not vary")
    # Powers of standardised values span the same space and keep their digits.
    z = (fitted - fitted.mean()) / spread
    more = scaled_design(np.column_stack([np.ones(len(z)), columns[:, 1:], z**2, z**3])).matrix
    added, left = more.shape[1] - columns.shape[1], len(z) - more.shape[1]
    if added < 1:
        return not_computed(against, "powers of the fitted values are combinations of the covariates")
    if left < 1:
        return not_computed(against, "too few links")
    rest = response - _projection(more, response)
    without = response - fitted
    gain, noise = float(without @ without - rest @ rest), float(rest @ rest)
    if noise <= 1e-20 * float(response @ response):
        return not_computed(against, "the regression leaves no residual")
    statistic = max(gain, 0.0) / added / (noise / left)
    note = f"F({added}, {left}) of the powers 2 and 3 of the fitted log; dyads taken as independent, equal variances"
    return Finding(against, statistic, float(fdtrc(added, left, statistic)), note)


def _projection(columns: Floats, values: Floats) -> Floats:
    basis = np.linalg.qr(columns)[0]
    return np.asarray(basis @ (basis.T @ values))


def standardised_square(index: Floats) -> Floats | None:
    """(n,) square of the index put to mean 0 and spread 1, infinite entries set to 0; None if it does not vary."""
    finite = np.isfinite(index)
    if int(finite.sum()) < 2:
        return None
    centre, spread = float(index[finite].mean()), float(index[finite].std())
    if spread <= 1e-9 * max(1.0, float(np.abs(index[finite]).max())):
        return None
    square = np.zeros(len(index))
    square[finite] = ((index[finite] - centre) / spread) ** 2
    return square
