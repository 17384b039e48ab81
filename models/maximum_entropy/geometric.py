"""Geometric weights given a link: the maximum-entropy law of counts with log-linear expectations."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import GeometricLinkLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import GeometricExcess
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links

__all__ = ["FittedGeometric", "GeometricModel"]


@dataclass(frozen=True)
class FittedGeometric:
    """Weight given a link: 1 plus a geometric excess with mean exp(index)."""

    index: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return 1.0 + np.exp(self.index.on(dyads))

    def distribution(self, dyads: Dyads, /) -> GeometricLinkLaw:
        return GeometricLinkLaw(np.exp(self.index.on(dyads)))


@dataclass(frozen=True)
class GeometricModel:
    """Geometric counts on observed links.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the expected excess beside a constant; none
        leaves one law for all links
    """

    covariates: tuple[str, ...] = ()

    name: ClassVar[str] = "geometric"
    family: ClassVar[Family] = Family.MAXIMUM_ENTROPY
    part: ClassVar[Part] = Part.WEIGHTS
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.OPTIONAL)
    summary: ClassVar[str] = (
        "Given which links exist, the least committal law of whole weights whose expectations are tied to the "
        "covariates: each weight is geometric on 1, 2, 3, ..."
    )
    formula: ClassVar[str] = (
        "P(w | link) = y^(w-1) (1 - y),  y = z / (1 + z),  log z = constant + sum of slope x covariate;  "
        "mean 1 + z"
    )
    parameters: ClassVar[str] = "maximum likelihood (a concave problem); covariates + 1"
    caution: ClassVar[str] = (
        "Its spread is tied to its mean, so very unequal weights among alike dyads are beyond it. Its slopes "
        "depend on the unit of the flows. It takes the links as given: pair it with a law of links."
    )
    sources: ClassVar[str] = "Jaynes (1957); Parisi et al. (2020) and its discrete analogue"

    def fit(self, dyads: Dyads, /) -> FittedGeometric:
        """Maximum likelihood on the observed links among these dyads.

        Raises
        ------
        ModelError : there are too few links
        """
        linked = observed_links(dyads)
        found = fit_indices(
            GeometricExcess(linked.counts), [linked.design(self.covariates)], node_pairs(linked)
        )
        return FittedGeometric(
            index=LinearIndex.of(found, self.covariates),
            estimates=index_estimates(found, self.covariates, EstimatePart.WEIGHTS),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
