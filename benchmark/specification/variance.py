"""Park-type test: does the variance grow with the mean as the law says?"""

from __future__ import annotations

from math import nan

import numpy as np

from steelyard.benchmark.specification.finding import CLUSTERED, ROBUST, Finding, not_computed, ratio
from steelyard.datasets import Floats
from steelyard.models import ErrorKind, ModelError
from steelyard.models.covariance import NodePairs
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson

__all__ = ["park"]

KINDS = ((ROBUST, ErrorKind.ROBUST), (CLUSTERED, ErrorKind.NODE_CLUSTERED))


def park(
    response: Floats, mean: Floats, shape: Floats, value: float, against: str, pairs: NodePairs
) -> tuple[Finding, ...]:
    """Test that the variance is proportional to a power of something.

    Fits E (w - m)^2 = exp(c + lambda log s) by Poisson pseudo-maximum likelihood and tests lambda = `value`.
    With s the mean, lambda is 1 for a Poisson variance and 2 for one proportional to the squared mean.

    Parameters
    ----------
    response, mean : (n,) observed and fitted weights
    shape : (n,) s; observations where s is not positive and finite are left out and counted
    value : lambda under the hypothesis
    against : the hypothesis in words
    pairs : nodes of each observation

    Returns
    -------
    A row with robust (HC1) and one with node-clustered errors; two-sided against N(0, 1). That m is estimated
    is not taken into account, as usual for tests of this type.

    References
    ----------
    .. [1] Park (1966), Econometrica 34.
    .. [2] Manning & Mullahy (2001), Journal of Health Economics 20.
    .. [3] Santos Silva & Tenreyro (2006), Review of Economics and Statistics 88.
    """
    with np.errstate(over="ignore", invalid="ignore"):
        squared = (np.asarray(response) - mean) ** 2
    used = (shape > 0) & np.isfinite(shape) & np.isfinite(squared)
    left_out = int((~used).sum())
    said = f"; {left_out} dyads without a finite positive variance left out" if left_out else ""
    labels = [f"{against}; {label}" for label, _ in KINDS]
    reason = _no_regression(squared[used], shape[used])
    if reason:
        return tuple(not_computed(label, reason + said) for label in labels)
    some = NodePairs(pairs.origin[used], pairs.destination[used], pairs.n_nodes)
    # The scale of the squares is absorbed by the constant.
    scaled = squared[used] / squared[used].mean()
    design = np.column_stack([np.ones(len(scaled)), np.log(shape[used])])
    try:
        found = fit_indices(Poisson(scaled), [design], some)
    except ModelError as error:
        return tuple(not_computed(label, f"{error}{said}") for label in labels)
    if not found.convergence.converged or found.rank < 2 or found.directions:
        why = f"the regression of the squared errors is not certified ({found.convergence.message})"
        return tuple(not_computed(label, why + said) for label in labels)
    power = float(found.coefficients[0][1])
    rows = []
    for label, (name, kind) in zip(labels, KINDS, strict=True):
        variance = float(found.covariances[kind][1, 1]) if kind in found.covariances else nan
        size = f"{np.sqrt(variance):.4g}" if variance > 0 else "none"
        repaired = "; clustered variance repaired" if kind in found.repaired else ""
        note = f"lambda = {power:.6g}, {name} error {size}; tested lambda = {value:g}{repaired}{said}"
        rows.append(ratio(label, power - value, variance, note))
    return tuple(rows)


def _no_regression(squared: Floats, shape: Floats) -> str:
    """Why there is nothing to regress; empty where there is."""
    if len(squared) < 3:
        return "fewer than three dyads can be used"
    if not squared.mean() > 0:
        return "every fitted mean equals what was observed"
    logs = np.log(shape)
    if float(np.ptp(logs)) <= 1e-9 * max(1.0, float(np.abs(logs).max())):
        return "the variance under the law does not vary from dyad to dyad"
    return ""
