"""Whose expected flows are rivals, and what their comparison needs: the rival-means test of fitted candidates."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from steelyard.benchmark.specification.finding import Finding, not_computed
from steelyard.benchmark.specification.means import rival_means
from steelyard.benchmark.specification.pairs import Evaluated, Side
from steelyard.datasets import Dyads, Floats
from steelyard.models import Model, TwoPart
from steelyard.models.linear_index import node_pairs
from steelyard.models.nesting import covariate_names, nesting

__all__ = ["mean_findings"]

UNCERTIFIED = "the fit of the other is not certified"
NESTED = "one of the two means is a special case of the other, so they are no rivals"


def mean_findings(
    candidate: Side, rivals: Mapping[int, Side], dyads: Dyads
) -> Mapping[int, tuple[Finding, ...]]:
    """The rival-means test of one candidate's mean against each of several others, by their keys.

    The derivatives of the mean are spanned by m x for a log-linear mean, and by m x, (1 - p) m x and p x
    otherwise (exact for two-part laws of a logit with a log-linear or a geometric weight), x its covariates.
    """
    reason = _no_null(candidate.fit)
    alike: frozenset[int] = frozenset()
    if not reason:
        with_means = {key: r for key, r in rivals.items() if r.fit.mean is not None and r.fit.certified}
        alike = frozenset(key for key, r in with_means.items() if _one_within_other(candidate, r, dyads))
        usable = {
            key: r.fit.mean for key, r in with_means.items() if key not in alike and r.fit.mean is not None
        }
        gradient = _gradient(candidate, dyads)
        assert candidate.fit.mean is not None  # _no_null has a reason otherwise
        found = rival_means(
            dyads.weights, candidate.fit.mean, gradient, list(usable.values()), node_pairs(dyads)
        )
        done = dict(zip(usable, found, strict=True))
    else:
        done = {}
    return {
        key: done.get(key, (not_computed("", reason or (NESTED if key in alike else UNCERTIFIED)),))
        for key, rival in rivals.items()
        if rival.fit.mean is not None and candidate.fit.mean is not None
    }


def _one_within_other(first: Side, second: Side, dyads: Dyads) -> bool:
    """Whether one mean is a special case of the other, so that their difference under the null is noise."""
    return _mean_within(first, second, dyads) or _mean_within(second, first, dyads)


def _mean_within(smaller: Side, larger: Side, dyads: Dyads) -> bool:
    """By a law inside a law, or by log-linear means (of the weight given a link) with fewer covariates."""
    a, b = smaller.model, larger.model
    if nesting(a, b) is not None:
        return True
    if isinstance(a, TwoPart) and isinstance(b, TwoPart):
        if nesting(a.links, b.links) is None:
            return False
        a, b = a.weights, b.weights
    elif isinstance(a, TwoPart) or isinstance(b, TwoPart):
        return False
    fewer = set(covariate_names(a)) <= set(covariate_names(b))
    return fewer and _is_exponential(smaller, a, dyads) and _is_exponential(larger, b, dyads)


def _is_exponential(side: Side, part: Model, dyads: Dyads) -> bool:
    """Whether the mean, of a two-part law the one given a link, is log-linear in the part's covariates."""
    mean, p = side.fit.mean, side.fit.link_probability
    assert mean is not None  # asked for candidates with a mean only
    if isinstance(side.model, TwoPart) and p is not None:
        mean = np.divide(mean, p, out=np.zeros(len(mean)), where=p > 0)
    return _log_linear(mean, dyads.design(covariate_names(part)))


def _no_null(candidate: Evaluated) -> str:
    if candidate.mean is None:
        return "it has no mean of whole flows"
    if not candidate.certified:
        return "the fit of the candidate is not certified"
    if candidate.by_node:
        return "the candidate's mean has a parameter for each node, and their derivatives are not taken out"
    return ""


def _gradient(candidate: Side, dyads: Dyads) -> Floats:
    """(n, k) columns that span the derivatives of the mean."""
    mean, p = candidate.fit.mean, candidate.fit.link_probability
    assert mean is not None  # asked for candidates with a mean only
    parts = (
        (candidate.model.links, candidate.model.weights)
        if isinstance(candidate.model, TwoPart)
        else (candidate.model,)
    )
    x = dyads.design(tuple(dict.fromkeys(name for part in parts for name in covariate_names(part))))
    own = mean[:, None] * x
    if p is None or _log_linear(mean, x):
        return own
    return np.hstack([own, (1.0 - p)[:, None] * own, p[:, None] * x])


def _log_linear(mean: Floats, x: Floats) -> bool:
    """Whether the log of the mean is a combination of the covariates."""
    used = (mean > 0) & np.isfinite(mean)
    logs = np.log(mean[used])
    if len(logs) <= x.shape[1]:
        return False
    scale = np.abs(x[used]).max(axis=0)
    columns = x[used] / np.where(scale > 0, scale, 1.0)
    rest = logs - columns @ np.linalg.lstsq(columns, logs, rcond=None)[0]
    return float(np.abs(rest).max()) <= 1e-6 * max(1.0, float(np.abs(logs).max()))
