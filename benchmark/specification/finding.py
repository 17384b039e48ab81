"""What a test of specification finds, and what it says when it cannot be computed."""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite, nan, sqrt

import numpy as np
from scipy.special import ndtr

from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs, node_clustered_meat

__all__ = [
    "CLUSTERED",
    "INDEPENDENT",
    "ROBUST",
    "Finding",
    "clustered_variance",
    "normal_p_value",
    "not_computed",
    "ratio",
]

INDEPENDENT, ROBUST, CLUSTERED = "independent dyads", "robust", "node-clustered"


@dataclass(frozen=True)
class Finding:
    """One row of a test.

    Attributes
    ----------
    against : the alternative or hypothesis, and after the last semicolon the kind of error
    statistic, p_value : nan where the test could not be computed; then `note` says why
    note : estimates behind the statistic, its reference law, and what to beware of
    """

    against: str
    statistic: float
    p_value: float
    note: str


def not_computed(against: str, reason: str) -> Finding:
    """A row without a statistic, and the reason."""
    return Finding(against, nan, nan, f"not computed: {reason}")


def ratio(
    against: str, estimate: float, variance: float, note: str, *, one_sided: bool = False, unit: float = 0.0
) -> Finding:
    """An estimate over its error, read as standard normal.

    Parameters
    ----------
    variance : of the estimate; a clustered one may be zero or negative
    one_sided : whether only large positive values speak against the hypothesis
    unit : variances up to 1e-20 times its square are rounding
    """
    if not isfinite(estimate) or not isfinite(variance):
        return not_computed(against, f"the estimate or its variance is not finite; {note}")
    if variance <= 1e-20 * unit**2 or variance <= 0.0:
        return not_computed(against, f"the variance is not positive; {note}")
    statistic = estimate / sqrt(variance)
    return Finding(against, statistic, normal_p_value(statistic, one_sided=one_sided), note)


def normal_p_value(statistic: float, *, one_sided: bool) -> float:
    """Upper tail, or both tails, of the standard normal."""
    return float(ndtr(-statistic)) if one_sided else 2.0 * float(ndtr(-abs(statistic)))


def clustered_variance(scores: Floats, pairs: NodePairs) -> float:
    """Variance of the sum of (n,) scores when dyads that share a node are dependent; may be negative.

    It is node_clustered_meat of one column: sum_i S_i^2 minus the sum of R^2 over unordered pairs.
    """
    return float(node_clustered_meat(np.asarray(scores)[:, None], pairs)[0, 0])
