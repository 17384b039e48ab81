"""Poisson regression of counts on all dyads."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import PoissonLaw
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.measure import Measure

__all__ = ["FittedPoisson", "PoissonModel"]


@dataclass(frozen=True)
class FittedPoisson:
    """Mean exp(index) on every dyad."""

    index: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return np.exp(self.index.on(dyads))

    def distribution(self, dyads: Dyads, /) -> PoissonLaw:
        return PoissonLaw(self.expected_weight(dyads))


@dataclass(frozen=True)
class PoissonModel:
    """Counts with log-linear mean, zeros included.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "poisson"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.JOINT
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Counts on every dyad, zeros included, are Poisson with a log-linear mean. The slopes are consistent "
        "whenever that mean is right, whatever the variance; the probabilities are not."
    )
    formula: ClassVar[str] = "P(w) = exp(-m) m^w / w!,  log m = constant + sum of slope x covariate"
    parameters: ClassVar[str] = "maximum likelihood; covariates + 1"
    caution: ClassVar[str] = (
        "Flows vary far more than Poisson counts: read robust or node-clustered errors, and do not trust its "
        "probability of a zero. Its log-likelihood on other units is another number."
    )
    sources: ClassVar[str] = "Gourieroux, Monfort & Trognon (1984); Santos Silva & Tenreyro (2006)"

    def fit(self, dyads: Dyads, /) -> FittedPoisson:
        """Maximum likelihood on all of these dyads, zeros included."""
        found = fit_indices(Poisson(dyads.counts), [dyads.design(self.covariates)], node_pairs(dyads))
        return FittedPoisson(
            index=LinearIndex.of(found, self.covariates),
            estimates=index_estimates(found, self.covariates, EstimatePart.JOINT),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
