"""Rival models of the mean of non-negative data with many zeros."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from steelyard.benchmark.specification.finding import (
    CLUSTERED,
    ROBUST,
    Finding,
    clustered_variance,
    not_computed,
    ratio,
)
from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs
from steelyard.models.design import scaled_design

__all__ = ["rival_means"]

SOURCE = "formula from memory (Santos Silva, Tenreyro & Windmeijer 2015)"


def rival_means(
    response: Floats, mean: Floats, gradient: Floats, rivals: Sequence[Floats], pairs: NodePairs
) -> list[tuple[Finding, ...]]:
    """Is the candidate's mean right, or does a rival's mean explain its errors?

    Least squares of (w - m) / sqrt(m) on the columns of the gradient over sqrt(m) and on (r - m) / sqrt(m),
    with m the candidate's mean and r the rival's. The hypothesis is that m is right, whatever the law: then
    the last coefficient is 0; if the rival is right it is 1. The gradient takes out what the estimates of the
    candidate's parameters contribute. Formula from memory: an artificial regression of the Davidson & MacKinnon
    type with the weights 1 / m, as their article proposes for data of this kind; details may differ from it.

    Parameters
    ----------
    response, mean : (n,) observed amounts and the candidate's expected ones
    gradient : (n, k) columns that span the derivatives of m with respect to its parameters
    rivals : (n,) expected amounts of other candidates
    pairs : nodes of each observation

    Returns
    -------
    For each rival, a row with the robust (HC1) error and one with the node-clustered error; two-sided, N(0, 1).

    References
    ----------
    .. [1] Santos Silva, Tenreyro & Windmeijer (2015), Journal of Econometric Methods 4.
    .. [2] Davidson & MacKinnon (1981), Econometrica 49.
    """
    used = (mean > 0) & np.isfinite(mean)
    left_out = int((~used).sum())
    if int(used.sum()) < gradient.shape[1] + 2:
        reason = f"only {int(used.sum())} dyads have a finite positive mean"
        return [_neither(reason) for _ in rivals]
    root = np.sqrt(mean[used])
    error = (response[used] - mean[used]) / root
    columns = gradient[used] / root[:, None]
    basis = np.linalg.qr(scaled_design(columns).matrix)[0]
    some = NodePairs(pairs.origin[used], pairs.destination[used], pairs.n_nodes)
    rest = error - basis @ (basis.T @ error)
    said = f"; {left_out} dyads without a finite positive mean left out" if left_out else ""
    found = []
    for rival in rivals:
        if not np.isfinite(rival[used]).all():
            found.append(_neither("the rival's mean is not finite on every dyad"))
            continue
        difference = (rival[used] - mean[used]) / root
        own = difference - basis @ (basis.T @ difference)
        # Of a difference that is rounding, or that the gradient spans, nothing is left to test.
        if float(own @ own) <= 1e-16 * max(float(difference @ difference), float(root @ root) * 1e-4):
            found.append(_neither("the two means do not differ beyond what the parameters could make up for"))
            continue
        found.append(_tested(rest, own, basis.shape[1] + 1, some, said))
    return found


def _tested(rest: Floats, own: Floats, k: int, pairs: NodePairs, said: str) -> tuple[Finding, ...]:
    """Partialled-out regression of one column, with both kinds of error."""
    norm = float(own @ own)
    slope = float(own @ rest) / norm
    scores = own * (rest - slope * own)
    n = len(rest)
    robust = n / (n - k) * float(scores @ scores) / norm**2
    clustered = clustered_variance(scores, pairs) / norm**2
    return tuple(
        ratio(
            kind,
            slope,
            variance,
            f"coefficient {slope:.6g} (0 if the mean is right, 1 if the rival's is); {SOURCE}{said}",
        )
        for kind, variance in ((ROBUST, robust), (CLUSTERED, clustered))
    )


def _neither(reason: str) -> tuple[Finding, ...]:
    return tuple(not_computed(kind, f"{reason}; {SOURCE}") for kind in (ROBUST, CLUSTERED))
