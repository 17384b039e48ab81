"""Zero-truncated Poisson regression, as a law of the weight given a link."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import ZeroTruncatedLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links
from steelyard.models.truncated_likelihoods import TruncatedPoisson

__all__ = ["FittedTruncatedPoisson", "TruncatedPoissonModel"]


@dataclass(frozen=True)
class FittedTruncatedPoisson:
    """Weight given a link: Poisson around exp(index), given that it is not zero."""

    index: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> ZeroTruncatedLaw:
        return ZeroTruncatedLaw.of(np.exp(self.index.on(dyads)), 0.0)


@dataclass(frozen=True)
class TruncatedPoissonModel:
    """Counts on observed links: Poisson but for the zeros, which are another part's business.

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
        "The count of a link is Poisson given that it is not zero; with a law of links in front it is the Poisson "
        "hurdle."
    )
    formula: ClassVar[str] = (
        "P(w | link) = exp(-m) m^w / (w! (1 - exp(-m))),  log m = constant + sum of slope x covariate"
    )
    parameters: ClassVar[str] = "maximum likelihood on the observed links; covariates + 1"
    caution: ClassVar[str] = (
        "Slopes are those of the untruncated mean m; the expected weight of a link is m / (1 - exp(-m)). Flows "
        "vary far more than Poisson counts, and unlike Poisson on all dyads its slopes then have no other excuse: "
        "they are consistent only if the law is right."
    )
    sources: ClassVar[str] = "Cragg (1971); Mullahy (1986)"

    def fit(self, dyads: Dyads, /) -> FittedTruncatedPoisson:
        """Maximum likelihood on the observed links among these dyads."""
        linked = observed_links(dyads)
        design = linked.design(self.covariates)
        found = fit_indices(TruncatedPoisson(linked.counts), [design], node_pairs(linked))
        return FittedTruncatedPoisson(
            index=LinearIndex.of(found, self.covariates),
            estimates=index_estimates(found, self.covariates, EstimatePart.WEIGHTS),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
