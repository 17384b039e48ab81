"""Zero-inflated negative-binomial regression of counts on all dyads."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import DispersionForm, NegativeBinomialLaw, ZeroInflatedLaw
from steelyard.models.econometric.zero_inflated_fit import (
    dispersion_estimate,
    fit_zero_inflated,
    inflation_index,
    part_estimates,
)
from steelyard.models.estimates import Estimates
from steelyard.models.linear_index import LinearIndex, node_pairs
from steelyard.models.measure import Measure

__all__ = ["FittedZeroInflatedNegativeBinomial", "ZeroInflatedNegativeBinomialModel"]


@dataclass(frozen=True)
class FittedZeroInflatedNegativeBinomial:
    """Zero with the probability of one index, else negative binomial around the exponential of another."""

    index: LinearIndex
    inflation: LinearIndex
    alpha: float
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> ZeroInflatedLaw:
        counts = NegativeBinomialLaw(np.exp(self.index.on(dyads)), self.alpha, DispersionForm.QUADRATIC)
        return ZeroInflatedLaw(self.inflation.on(dyads), counts)


@dataclass(frozen=True)
class ZeroInflatedNegativeBinomialModel:
    """Negative binomial counts (variance m + alpha m^2), but for a share of dyads that are zero in any case.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant
    inflation : those that enter the log odds of being zero in any case; empty for the constant alone
    """

    covariates: tuple[str, ...]
    inflation: tuple[str, ...] = ()

    name: ClassVar[str] = "zero_inflated_negative_binomial"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.JOINT
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Some dyads are zero in any case, with a probability q that has covariates of its own; all others carry "
        "negative binomial counts, which may be zero too."
    )
    formula: ClassVar[str] = (
        "P(0) = q + (1 - q) f(0),  P(w) = (1 - q) f(w),  f negative binomial with mean m and variance m + alpha "
        "m^2,  log q / (1 - q) = constant + sum of inflation slope x covariate,  log m = constant + sum of slope x "
        "covariate"
    )
    parameters: ClassVar[str] = (
        "maximum likelihood over both indices and alpha jointly, from several starts; covariates + 1, inflation "
        "covariates + 1 unless nothing is inflated, and alpha unless it is at its edge 0"
    )
    caution: ClassVar[str] = (
        "A large alpha and inflation explain the same zeros, and its likelihood can have more than one maximum: look "
        "at the errors of the inflation part before reading it. Estimates depend on the unit of the flows. Comparing "
        "it with the plain negative binomial by Vuong's statistic is no test of zero inflation."
    )
    sources: ClassVar[str] = "Greene (1994); Burger, van Oort & Linders (2009); Wilson (2015)"

    def fit(self, dyads: Dyads, /) -> FittedZeroInflatedNegativeBinomial:
        """Maximum likelihood on all of these dyads, zeros included."""
        designs = [dyads.design(self.covariates), dyads.design(self.inflation)]
        fit = fit_zero_inflated(dyads.counts, designs, node_pairs(dyads), dispersed=True)
        alpha = dispersion_estimate(fit)
        return FittedZeroInflatedNegativeBinomial(
            index=LinearIndex.of(fit.found, self.covariates),
            inflation=inflation_index(fit, self.inflation),
            alpha=alpha.value,
            estimates=part_estimates(fit, self.covariates, self.inflation) + Estimates((alpha,)),
            n_parameters=fit.found.rank,
            convergence=fit.convergence,
        )
