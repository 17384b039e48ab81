"""Two log-likelihoods of the same observations: Vuong's test, and the likelihood ratio of nested laws."""

from __future__ import annotations

from math import log

import numpy as np
from scipy.special import chdtrc

from steelyard.benchmark.specification.finding import (
    CLUSTERED,
    INDEPENDENT,
    Finding,
    clustered_variance,
    not_computed,
    ratio,
)
from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs

__all__ = ["VUONG_VERSIONS", "likelihood_ratio", "vuong"]

VUONG_VERSIONS = ("raw", "AIC-corrected", "BIC-corrected")
CAUTION = "for laws of which none contains the other; no test for zero inflation (Wilson 2015)"


def vuong(
    first: Floats, second: Floats, n_first: int, n_second: int, pairs: NodePairs | None
) -> tuple[Finding, ...]:
    """Is one of two non-nested laws nearer to the data?

    With d the difference of log densities, the statistic is sum d over its error, less a correction for k
    parameters: none, k1 - k2 (AIC), or (k1 - k2) / 2 log n (BIC).

    Parameters
    ----------
    first, second : (n,) log densities of the observations at the two maxima
    n_first, n_second : numbers of parameters
    pairs : nodes of each observation; None leaves out the node-clustered rows

    Returns
    -------
    The three versions with the independent-dyads error, sqrt(n) times the n - 1 standard deviation, and with
    the node-clustered one. Two-sided against N(0, 1); positive values favour the first law.

    References
    ----------
    .. [1] Vuong (1989), Econometrica 57.
    .. [2] Wilson (2015), Economics Letters 127.
    """
    labels = [f"{v}; {k}" for k in (INDEPENDENT, CLUSTERED) for v in VUONG_VERSIONS]
    if pairs is None:
        labels = labels[: len(VUONG_VERSIONS)]
    n = len(first)
    reason = _no_comparison(first, second)
    if reason:
        return tuple(not_computed(label, reason) for label in labels)
    d = first - second
    total, centred = float(d.sum()), d - d.mean()
    unit = float(np.abs(d).max())
    extra = n_first - n_second
    prices = (0.0, float(extra), 0.5 * extra * log(n))
    variances = [n * float(centred @ centred) / (n - 1)]
    if pairs is not None:
        variances.append(clustered_variance(centred, pairs))
    rows = []
    for position, label in enumerate(labels):
        estimate, variance = total - prices[position % 3], variances[position // 3]
        note = f"{_favours(estimate)}; log-likelihood difference {total:.6g}, parameters {n_first} and {n_second}"
        rows.append(ratio(label, estimate, variance, f"{note}; {CAUTION}", unit=unit))
    return tuple(rows)


def _favours(estimate: float) -> str:
    if estimate == 0.0:
        return "favours neither"
    return "favours the candidate" if estimate > 0 else "favours the other"


def _no_comparison(first: Floats, second: Floats) -> str:
    if len(first) < 2:
        return "fewer than two observations"
    impossible = [int((~np.isfinite(values)).sum()) for values in (first, second)]
    if any(impossible):
        return (
            f"observations without a finite log density: {impossible[0]} under the candidate, {impossible[1]} "
            "under the other"
        )
    d = first - second
    if float(np.ptp(d)) <= 1e-9 * max(1.0, float(np.abs(first).max())):
        return "the two laws give every observation the same ratio of densities"
    return ""


def likelihood_ratio(smaller: float, larger: float, free: int, at_edge: bool, against: str) -> Finding:
    """Twice the difference of two maximised log-likelihoods, one law containing the other.

    Parameters
    ----------
    smaller, larger : maximised log-likelihoods
    free : restrictions inside the parameter space
    at_edge : whether one more parameter sits at the edge of its range under the smaller law; the reference is
        then the half-half mixture of chi-square laws with `free` and `free` + 1 degrees of freedom

    References
    ----------
    .. [1] Self & Liang (1987), Journal of the American Statistical Association 82.
    """
    if not np.isfinite(smaller) or not np.isfinite(larger):
        return not_computed(against, "a log-likelihood is not finite")
    degrees = free + int(at_edge)
    if degrees < 1:
        return not_computed(against, "the larger law has no identified parameter more than the smaller")
    statistic = 2.0 * (larger - smaller)
    if statistic < -1e-8 * max(1.0, abs(larger)):
        return not_computed(against, "the larger law fits worse, so its maximum is not the highest one")
    statistic = max(statistic, 0.0)
    p = float(chdtrc(degrees, statistic))
    law = f"chi-square({degrees})"
    if at_edge:
        inner = float(chdtrc(free, statistic)) if free else float(statistic == 0.0)
        p = 0.5 * p + 0.5 * inner
        law = f"half chi-square({free}), half chi-square({degrees}): one parameter at the edge of its range"
    return Finding(against, statistic, p, f"reference {law}; dyads taken as independent")
