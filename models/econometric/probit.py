"""Probit regression of links on covariates."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from scipy.special import log_ndtr

from steelyard.datasets import Dyads, Floats
from steelyard.models.binary_likelihoods import Probit
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import LinkLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.measure import Measure

__all__ = ["FittedProbit", "ProbitModel"]


@dataclass(frozen=True)
class FittedProbit:
    """Probability of a link equal to the normal distribution function of a linear index."""

    index: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.LINKS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).link_probability

    def distribution(self, dyads: Dyads, /) -> LinkLaw:
        index = self.index.on(dyads)
        # Both logarithms keep their digits, where 1 - p itself would round to 0 at an index of 9.
        return LinkLaw.from_log_odds(log_ndtr(index) - log_ndtr(-index))


@dataclass(frozen=True)
class ProbitModel:
    """Links with probability Phi(index), Phi the standard normal distribution function.

    Parameters
    ----------
    covariates : names of the covariates that enter the index beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "probit"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.LINKS
    measure: ClassVar[Measure] = Measure.LINKS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "A link is there when a linear index plus a standard normal error is above zero; the errors of two "
        "dyads are independent."
    )
    formula: ClassVar[str] = "p = Phi(constant + sum of slope x covariate), Phi the standard normal law"
    parameters: ClassVar[str] = "maximum likelihood; covariates + 1, fewer where the data are separated"
    caution: ClassVar[str] = (
        "Its slopes are in standard deviations of the error, about 0.6 of those of a logit, and its tails are "
        "thinner: one link against the odds weighs more. It knows nothing of a node but its covariates."
    )
    sources: ClassVar[str] = "McCullagh & Nelder (1989); Correia, Guimaraes & Zylkin (2019) on separation"

    def fit(self, dyads: Dyads, /) -> FittedProbit:
        """Maximum likelihood on all of these dyads."""
        links = dyads.links.astype(float)
        found = fit_indices(Probit(links), [dyads.design(self.covariates)], node_pairs(dyads))
        return FittedProbit(
            index=LinearIndex.of(found, self.covariates),
            estimates=index_estimates(found, self.covariates, EstimatePart.LINKS),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
