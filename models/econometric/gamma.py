"""Gamma regression of observed flows with a log-linear mean, as a law of the weight given a link."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import GammaLinkLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.gamma_likelihood import Gamma
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs, scale_estimate
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links, refuse_exact_flows

__all__ = ["FittedGamma", "GammaModel"]


@dataclass(frozen=True)
class FittedGamma:
    """Weight given a link: gamma with mean exp(index) and variance alpha mean^2."""

    index: LinearIndex
    alpha: float
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.AMOUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return np.exp(self.index.on(dyads))

    def distribution(self, dyads: Dyads, /) -> GammaLinkLaw:
        return GammaLinkLaw(self.expected_weight(dyads), self.alpha)


@dataclass(frozen=True)
class GammaModel:
    """Gamma amounts on observed links, with a log-linear mean and one dispersion.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "gamma"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.WEIGHTS
    measure: ClassVar[Measure] = Measure.AMOUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Positive flows are gamma with a log-linear mean and a variance that grows with its square. Zeros are "
        "dropped, so it says how heavy a link is and nothing of which links exist. It enters as a density of w."
    )
    formula: ClassVar[str] = (
        "w ~ gamma with mean m and variance alpha m^2 (shape 1 / alpha), log m = constant + sum of slope x "
        "covariate, given a link"
    )
    parameters: ClassVar[str] = "maximum likelihood, slopes and alpha together; covariates + 2, alpha counted"
    caution: ClassVar[str] = (
        "The slopes are consistent whenever the mean is right, but every flow has the same relative weight in "
        "them, so small and poorly measured flows count as much as large ones. With alpha above 1 the density is "
        "infinite at zero, and flows rounded to small units then look more likely than they are."
    )
    sources: ClassVar[str] = (
        "McCullagh & Nelder (1989); Manning & Mullahy (2001); Santos Silva & Tenreyro (2006)"
    )

    def fit(self, dyads: Dyads, /) -> FittedGamma:
        """Maximum likelihood on the observed links among these dyads.

        Raises
        ------
        ModelError : too few links, or the covariates explain every flow exactly
        """
        linked = observed_links(dyads)
        design = linked.design(self.covariates)
        refuse_exact_flows(linked.weights, design, "the gamma law", "alpha")
        found = fit_indices(Gamma(linked.weights), [design, np.ones((len(linked), 1))], node_pairs(linked))
        alpha = scale_estimate(found, 1, "alpha", EstimatePart.DISPERSION)
        return FittedGamma(
            index=LinearIndex.of(found, self.covariates),
            alpha=alpha.value,
            estimates=index_estimates(found, self.covariates, EstimatePart.WEIGHTS) + Estimates((alpha,)),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
