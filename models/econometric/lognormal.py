"""Least squares on the log of observed flows, as a law of the weight given a link."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import LognormalLinkLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import LogNormal
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs, scale_estimate
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links, refuse_exact_flows

__all__ = ["FittedLognormal", "LognormalModel"]


@dataclass(frozen=True)
class FittedLognormal:
    """Log of the weight given a link: normal around the index with standard deviation sigma."""

    index: LinearIndex
    sigma: float
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.AMOUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> LognormalLinkLaw:
        index = self.index.on(dyads)
        return LognormalLinkLaw(index, np.full(len(index), self.sigma))


@dataclass(frozen=True)
class LognormalModel:
    """Lognormal amounts on observed links: ordinary least squares on logs.

    Parameters
    ----------
    covariates : names of the covariates that enter the mean of the log beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "lognormal"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.WEIGHTS
    measure: ClassVar[Measure] = Measure.AMOUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Ordinary least squares on the log of positive flows. Zeros are dropped, so it says how heavy a link "
        "is and nothing of which links exist. It enters as a density of w, its Jacobian included."
    )
    formula: ClassVar[str] = "log w ~ Normal(constant + sum of slope x covariate, sigma^2), given a link"
    parameters: ClassVar[str] = (
        "least squares, sigma^2 the mean squared residual (maximum likelihood); covariates + 2, sigma counted"
    )
    caution: ClassVar[str] = (
        "Where the spread of logs depends on the covariates, its slopes are not those of the mean flow. Means "
        "in levels carry the factor exp(sigma^2 / 2)."
    )
    sources: ClassVar[str] = "Tinbergen (1962); Santos Silva & Tenreyro (2006)"

    def fit(self, dyads: Dyads, /) -> FittedLognormal:
        """Least squares on the observed links among these dyads.

        Raises
        ------
        ModelError : too few links, or the covariates explain every flow exactly
        """
        linked = observed_links(dyads)
        design = linked.design(self.covariates)
        refuse_exact_flows(linked.weights, design, "the lognormal", "sigma")
        found = fit_indices(
            LogNormal(linked.weights), [design, np.ones((len(linked), 1))], node_pairs(linked)
        )
        sigma = scale_estimate(found, 1, "sigma", EstimatePart.WEIGHTS)
        return FittedLognormal(
            index=LinearIndex.of(found, self.covariates),
            sigma=sigma.value,
            estimates=index_estimates(found, self.covariates, EstimatePart.WEIGHTS) + Estimates((sigma,)),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
