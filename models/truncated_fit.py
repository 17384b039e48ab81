"""The zero-truncated negative binomial with both its edges: which of three fits is the maximum."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np
from scipy.special import digamma

from steelyard.datasets.arrays import Floats
from steelyard.models.covariance import NodePairs
from steelyard.models.index_likelihood import IndexFit, IndexLikelihood, fit_indices
from steelyard.models.truncated_likelihoods import (
    LogarithmicSeries,
    TruncatedNegativeBinomial,
    TruncatedPoisson,
)

__all__ = ["TruncatedFit", "TruncatedForm", "fit_truncated_negative_binomial"]


class TruncatedForm(Enum):
    """Where the maximum of a zero-truncated negative binomial lies.

    POISSON : at alpha = 0
    INSIDE : at a finite alpha above 0
    LOGARITHMIC : at infinite alpha, where only the limit of alpha times the mean is identified
    """

    POISSON = "poisson"
    INSIDE = "inside"
    LOGARITHMIC = "logarithmic"


@dataclass(frozen=True, eq=False)
class TruncatedFit:
    """A fit and what its indices are: log mean (and log alpha), or the log of alpha times the mean."""

    form: TruncatedForm
    found: IndexFit


def fit_truncated_negative_binomial(
    response: Floats, design: Floats, pairs: NodePairs | None = None
) -> TruncatedFit:
    """Fit plain arrays of counts >= 1; inside, the second index is the constant log alpha.

    At both edges the slope of the likelihood says whether it is highest there among its neighbours. Such an edge
    and the fit inside are then compared by their likelihoods, since each may be a maximum of its own.

    Parameters
    ----------
    response : (n,) whole numbers >= 1
    design : (n, k), the first column the constant 1
    pairs : nodes of each observation, for node-clustered covariance

    Raises
    ------
    ModelError : there is too little to fit
    """
    poisson = fit_indices(TruncatedPoisson(response), [design], pairs)
    if len(response) - int(poisson.separated.sum()) <= poisson.rank + 1:
        return TruncatedFit(TruncatedForm.POISSON, poisson)
    series = fit_indices(LogarithmicSeries(response), [design], pairs)
    near = np.where(poisson.separated, 0.0, design @ poisson.coefficients[0])
    likelihood = TruncatedNegativeBinomial(response, near if poisson.convergence.converged else None)
    inside = fit_indices(likelihood, [design, np.ones((len(response), 1))], pairs)
    tried: list[tuple[TruncatedForm, IndexFit, IndexLikelihood]] = []
    if _falls_from_poisson(response, design, poisson):
        tried.append((TruncatedForm.POISSON, poisson, TruncatedPoisson(response)))
    if _falls_from_series(response, design, series):
        tried.append((TruncatedForm.LOGARITHMIC, series, LogarithmicSeries(response)))
    tried.append((TruncatedForm.INSIDE, inside, likelihood))
    certified = [t for t in tried if t[1].convergence.converged]
    if not certified:
        return TruncatedFit(TruncatedForm.INSIDE, inside)
    # The edges stand first, so that they win a tie.
    form, found, _ = max(certified, key=lambda t: _value(t[2], design, t[1]))
    return TruncatedFit(form, found)


def _index(design: Floats, found: IndexFit) -> Floats:
    """First index on the observations that are not separated."""
    return np.asarray(design[~found.separated] @ found.coefficients[0])


def _value(likelihood: IndexLikelihood, design: Floats, found: IndexFit) -> float:
    """Log-likelihood of the observations that are not separated; the rest are certain under all three laws."""
    kept = ~found.separated
    indices = [_index(design, found)]
    indices += [np.full(int(kept.sum()), c[0]) for c in found.coefficients[1:]]
    return likelihood.restricted(kept).value(indices)


def _falls_from_poisson(response: Floats, design: Floats, found: IndexFit) -> bool:
    """Whether the likelihood falls in alpha at alpha = 0, where its slope is half of what is summed here."""
    w, mean = response[~found.separated], np.exp(_index(design, found))
    with np.errstate(over="ignore"):
        cut_off = np.where(mean > 0.0, mean * mean / np.expm1(mean), 0.0)
    return float(np.sum((w - mean) ** 2 - w + cut_off)) <= 0.0


def _falls_from_series(response: Floats, design: Floats, found: IndexFit) -> bool:
    """Whether the likelihood falls in the size at size 0, given alpha times the mean.

    There its slope is the harmonic number of w - 1 less half of log(1 + z).
    """
    w, index = response[~found.separated], _index(design, found)
    harmonic = digamma(w) + np.euler_gamma
    return float(np.sum(harmonic - 0.5 * np.logaddexp(0.0, index))) <= 0.0
