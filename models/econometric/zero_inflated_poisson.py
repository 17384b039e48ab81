"""Zero-inflated Poisson regression of counts on all dyads."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import PoissonLaw, ZeroInflatedLaw
from steelyard.models.econometric.zero_inflated_fit import fit_zero_inflated, inflation_index, part_estimates
from steelyard.models.estimates import Estimates
from steelyard.models.linear_index import LinearIndex, node_pairs
from steelyard.models.measure import Measure

__all__ = ["FittedZeroInflatedPoisson", "ZeroInflatedPoissonModel"]


@dataclass(frozen=True)
class FittedZeroInflatedPoisson:
    """Zero with the probability of one index, else Poisson around the exponential of another."""

    index: LinearIndex
    inflation: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> ZeroInflatedLaw:
        return ZeroInflatedLaw(self.inflation.on(dyads), PoissonLaw(np.exp(self.index.on(dyads))))


@dataclass(frozen=True)
class ZeroInflatedPoissonModel:
    """Poisson counts, but for a share of dyads that are zero in any case.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant
    inflation : those that enter the log odds of being zero in any case; empty for the constant alone
    """

    covariates: tuple[str, ...]
    inflation: tuple[str, ...] = ()

    name: ClassVar[str] = "zero_inflated_poisson"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.JOINT
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Some dyads are zero in any case, with a probability q that has covariates of its own; all others carry "
        "Poisson counts, which may be zero too."
    )
    formula: ClassVar[str] = (
        "P(0) = q + (1 - q) exp(-m),  P(w) = (1 - q) exp(-m) m^w / w!,  log q / (1 - q) = constant + sum of "
        "inflation slope x covariate,  log m = constant + sum of slope x covariate"
    )
    parameters: ClassVar[str] = (
        "maximum likelihood over both indices jointly, from several starts; covariates + 1, and inflation "
        "covariates + 1 unless nothing is inflated"
    )
    caution: ClassVar[str] = (
        "Its likelihood can have more than one maximum. It mends the zeros and not the spread of the weights, and "
        "its slopes, unlike those of plain Poisson, are wrong where the law is. Comparing it with plain Poisson by "
        "Vuong's statistic is no test of zero inflation."
    )
    sources: ClassVar[str] = "Lambert (1992); Burger, van Oort & Linders (2009); Wilson (2015)"

    def fit(self, dyads: Dyads, /) -> FittedZeroInflatedPoisson:
        """Maximum likelihood on all of these dyads, zeros included."""
        designs = [dyads.design(self.covariates), dyads.design(self.inflation)]
        fit = fit_zero_inflated(dyads.counts, designs, node_pairs(dyads), dispersed=False)
        return FittedZeroInflatedPoisson(
            index=LinearIndex.of(fit.found, self.covariates),
            inflation=inflation_index(fit, self.inflation),
            estimates=part_estimates(fit, self.covariates, self.inflation),
            n_parameters=fit.found.rank,
            convergence=fit.convergence,
        )
