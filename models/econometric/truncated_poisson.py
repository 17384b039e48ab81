"""Zero-truncated Poisson regression of observed links' counts."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import PoissonLaw, ZeroTruncatedLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links
from steelyard.models.truncated_likelihoods import TruncatedPoisson

__all__ = ["FittedTruncatedPoisson", "TruncatedPoissonModel"]


@dataclass(frozen=True)
class FittedTruncatedPoisson:
    """Weight given a link: Poisson with mean exp(index), given that it is not zero."""

    index: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> ZeroTruncatedLaw:
        return ZeroTruncatedLaw(PoissonLaw(np.exp(self.index.on(dyads))))


@dataclass(frozen=True)
class TruncatedPoissonModel:
    """Counts on observed links, Poisson given that they are not zero.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the untruncated mean beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "truncated_poisson"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.WEIGHTS
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Counts of observed links are Poisson with a log-linear mean, given that they are not zero. It says how "
        "heavy a link is and nothing of which links exist; with a law of links it makes a hurdle model."
    )
    formula: ClassVar[str] = (
        "P(w) = m^w / (w! (exp(m) - 1)) for w >= 1, log m = constant + sum of slope x covariate, given a link"
    )
    parameters: ClassVar[str] = (
        "maximum likelihood; covariates + 1, fewer where links of weight 1 separate the data"
    )
    caution: ClassVar[str] = (
        "m is the mean before truncation; the expected weight of a link is m / (1 - exp(-m)). Unlike the Poisson "
        "on all dyads, its slopes are wrong when the law is, and flows vary far more than Poisson counts."
    )
    sources: ClassVar[str] = "Cragg (1971); Mullahy (1986)"

    def fit(self, dyads: Dyads, /) -> FittedTruncatedPoisson:
        """Maximum likelihood on the observed links among these dyads.

        Raises
        ------
        ModelError : too few links
        """
        linked = observed_links(dyads)
        likelihood = TruncatedPoisson(linked.counts)
        found = fit_indices(likelihood, [linked.design(self.covariates)], node_pairs(linked))
        return FittedTruncatedPoisson(
            index=LinearIndex.of(found, self.covariates),
            estimates=index_estimates(found, self.covariates, EstimatePart.WEIGHTS),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
