"""Zero-truncated negative-binomial regression, as a law of the weight given a link."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import ZeroTruncatedLaw
from steelyard.models.errors import ModelError
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.linear_index import (
    LinearIndex,
    alpha_estimate,
    index_estimates,
    node_pairs,
    with_alpha_at_its_edge,
)
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links
from steelyard.models.truncated_likelihoods import TruncatedNegativeBinomial, TruncatedPoisson

__all__ = [
    "FittedTruncatedNegativeBinomial",
    "TruncatedNegativeBinomialModel",
    "fit_truncated_negative_binomial",
]

# An alpha this large has no finite maximum behind it: the law is the logarithmic series to all digits that matter.
LIMIT_FROM = 1e6


@dataclass(frozen=True)
class FittedTruncatedNegativeBinomial:
    """Weight given a link: negative binomial around exp(index), given that it is not zero."""

    index: LinearIndex
    alpha: float
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> ZeroTruncatedLaw:
        return ZeroTruncatedLaw.of(np.exp(self.index.on(dyads)), self.alpha)


def fit_truncated_negative_binomial(
    response: Floats, design: Floats, pairs: NodePairs | None = None
) -> IndexFit:
    """Fit plain arrays of counts >= 1; the second index is the constant log alpha.

    Where the likelihood is highest at alpha = 0 the truncated Poisson fit comes back, with one index. As for the
    untruncated law, the slope at alpha = 0 alone does not say so, and both maxima are compared.

    Raises
    ------
    ModelError : too few counts; or the likelihood rises without end as alpha grows and the untruncated mean falls,
        towards the law of the logarithmic series
    """
    poisson = fit_indices(TruncatedPoisson(response), [design], errors=False)
    falls = _slope_at_zero(poisson, response, design) <= 0.0
    if falls and len(response) - int(poisson.separated.sum()) <= poisson.rank + 1:
        return fit_indices(TruncatedPoisson(response), [design], pairs)
    likelihood = TruncatedNegativeBinomial(response)
    inside = fit_indices(likelihood, [design, np.ones((len(response), 1))], pairs)
    alpha = float(np.exp(min(float(inside.coefficients[1][0]), 700.0))) if inside.rank else 1.0
    if not inside.convergence.converged and alpha > LIMIT_FROM and not falls:
        raise ModelError(
            f"the likelihood rises without end as alpha grows (it reached {alpha:.0e}) and the untruncated mean "
            "falls: the counts are at least as uneven as the logarithmic series allows, and no maximum exists; use "
            "geometric, lognormal or gamma weights"
        )
    if falls and (
        not inside.convergence.converged
        or _log_likelihood(likelihood, inside, design) <= _poisson_log_likelihood(poisson, response, design)
    ):
        return fit_indices(TruncatedPoisson(response), [design], pairs)
    return inside


def _index(found: IndexFit, design: Floats) -> Floats:
    """(n,) index, so low on separated observations that they are certain."""
    index = np.full(len(design), -700.0)
    index[~found.separated] = design[~found.separated] @ found.coefficients[0]
    return index


def _slope_at_zero(found: IndexFit, response: Floats, design: Floats) -> float:
    """Slope of the log-likelihood in alpha at alpha = 0, times two."""
    kept = ~found.separated
    mean = np.exp(_index(found, design)[kept])
    with np.errstate(over="ignore"):
        hidden = mean**2 / np.expm1(mean)
    return float(np.sum((response[kept] - mean) ** 2 - response[kept] + hidden))


def _log_likelihood(likelihood: TruncatedNegativeBinomial, found: IndexFit, design: Floats) -> float:
    some = likelihood.restricted(~found.separated)
    log_alpha = np.full(len(some.response), found.coefficients[1][0])
    return some.log_mass(_index(found, design)[~found.separated], log_alpha)


def _poisson_log_likelihood(found: IndexFit, response: Floats, design: Floats) -> float:
    kept = ~found.separated
    law = ZeroTruncatedLaw.of(np.exp(_index(found, design)[kept]), 0.0)
    return float(law.log_density(response[kept]).sum())


@dataclass(frozen=True)
class TruncatedNegativeBinomialModel:
    """Counts on observed links: negative binomial but for the zeros, which are another part's business.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the untruncated mean beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "truncated_negative_binomial"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.WEIGHTS
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "The count of a link is negative binomial given that it is not zero; with a law of links in front it is "
        "the negative-binomial hurdle."
    )
    formula: ClassVar[str] = (
        "P(w | link) = f(w) / (1 - f(0)),  f negative binomial with mean m and variance m + alpha m^2,  log m = "
        "constant + sum of slope x covariate"
    )
    parameters: ClassVar[str] = (
        "maximum likelihood on the observed links; covariates + 1, and alpha unless it is at its edge 0"
    )
    caution: ClassVar[str] = (
        "Slopes are those of the untruncated mean, of which no zero is seen: with heavy-tailed flows alpha is large, "
        "most of f lies on the unseen zero, and alpha and the constant are told apart only weakly. Where the "
        "likelihood rises towards the logarithmic series it has no maximum, and the fit is refused."
    )
    sources: ClassVar[str] = "Cragg (1971); Mullahy (1986); Cameron & Trivedi (1998)"

    def fit(self, dyads: Dyads, /) -> FittedTruncatedNegativeBinomial:
        """Maximum likelihood on the observed links among these dyads."""
        linked = observed_links(dyads)
        design = linked.design(self.covariates)
        found = fit_truncated_negative_binomial(linked.counts, design, node_pairs(linked))
        alpha = alpha_estimate(found, "the maximum is the truncated Poisson law")
        return FittedTruncatedNegativeBinomial(
            index=LinearIndex.of(found, self.covariates),
            alpha=alpha.value,
            estimates=index_estimates(found, self.covariates, EstimatePart.WEIGHTS) + Estimates((alpha,)),
            n_parameters=found.rank,
            convergence=with_alpha_at_its_edge(found),
        )
