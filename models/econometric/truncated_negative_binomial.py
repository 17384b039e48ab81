"""Zero-truncated negative-binomial regression of observed links' counts, quadratic variance (form 2)."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import inf
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.distributions import (
    DispersionForm,
    LogarithmicSeriesLinkLaw,
    NegativeBinomialLaw,
    ZeroTruncatedLaw,
)
from steelyard.models.estimates import Estimate, EstimatePart, Estimates, Status
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs, scale_estimate
from steelyard.models.measure import Measure
from steelyard.models.observed_links import observed_links
from steelyard.models.truncated_fit import TruncatedFit, TruncatedForm, fit_truncated_negative_binomial

__all__ = ["FittedTruncatedNegativeBinomial", "TruncatedNegativeBinomialModel"]


@dataclass(frozen=True)
class FittedTruncatedNegativeBinomial:
    """Weight given a link: negative binomial with mean exp(index), given that it is not zero.

    At infinite alpha the index is the log of alpha times the mean, and the law is a logarithmic series.
    """

    index: LinearIndex
    alpha: float
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).mean

    def distribution(self, dyads: Dyads, /) -> ZeroTruncatedLaw | LogarithmicSeriesLinkLaw:
        index = self.index.on(dyads)
        if self.alpha == inf:
            return LogarithmicSeriesLinkLaw(index)
        return ZeroTruncatedLaw(NegativeBinomialLaw(np.exp(index), self.alpha, DispersionForm.QUADRATIC))


@dataclass(frozen=True)
class TruncatedNegativeBinomialModel:
    """Counts on observed links, negative binomial given that they are not zero.

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
        "Counts of observed links are negative binomial with a log-linear mean, given that they are not zero. It "
        "says how heavy a link is and nothing of which links exist; with a law of links it makes a hurdle model."
    )
    formula: ClassVar[str] = (
        "P(w) = N(w) / (1 - N(0)) for w >= 1, N negative binomial with mean m and variance m + alpha m^2, log m = "
        "constant + sum of slope x covariate, given a link"
    )
    parameters: ClassVar[str] = (
        "maximum likelihood; covariates + 1, and alpha unless it is at an edge: 0 (truncated Poisson) or infinity "
        "(logarithmic series, its index the log of alpha m)"
    )
    caution: ClassVar[str] = (
        "m is the mean before truncation, an extrapolation to zeros that the law has not seen: where alpha is "
        "large, m and alpha are hardly told apart, and only the expected weight m / (1 - N(0)) is to be read. "
        "Its estimates depend on the unit of the flows."
    )
    sources: ClassVar[str] = "Cragg (1971); Mullahy (1986)"

    def fit(self, dyads: Dyads, /) -> FittedTruncatedNegativeBinomial:
        """Maximum likelihood on the observed links among these dyads, both edges of alpha included.

        Raises
        ------
        ModelError : too few links
        """
        linked = observed_links(dyads)
        design = linked.design(self.covariates)
        fitted = fit_truncated_negative_binomial(linked.counts, design, node_pairs(linked))
        found = fitted.found
        alpha = _alpha(fitted)
        convergence = found.convergence
        if alpha.status is Status.BOUNDARY:
            edge = "0" if alpha.value == 0.0 else "infinity"
            said = "; ".join(m for m in (convergence.message, f"alpha at its edge {edge}") if m)
            convergence = replace(convergence, message=said)
        return FittedTruncatedNegativeBinomial(
            index=LinearIndex.of(found, self.covariates),
            alpha=alpha.value,
            estimates=_index_rows(fitted, self.covariates) + Estimates((alpha,)),
            n_parameters=found.rank,
            convergence=convergence,
        )


def _alpha(fitted: TruncatedFit) -> Estimate:
    """The row of alpha."""
    if fitted.form is TruncatedForm.INSIDE:
        return scale_estimate(fitted.found, 1, "alpha", EstimatePart.DISPERSION)
    if fitted.form is TruncatedForm.POISSON:
        value, note = 0.0, "no overdispersion: the maximum is the truncated Poisson law"
    else:
        value, note = inf, "the likelihood rises in alpha without end: the maximum is the logarithmic series"
    return Estimate(EstimatePart.DISPERSION, "alpha", value, {}, Status.BOUNDARY, True, note)


def _index_rows(fitted: TruncatedFit, covariates: tuple[str, ...]) -> Estimates:
    """The rows of the index, the constant saying what it is the constant of at infinite alpha."""
    rows = index_estimates(fitted.found, covariates, EstimatePart.WEIGHTS).rows
    if fitted.form is TruncatedForm.LOGARITHMIC:
        said = "of the log of alpha times the mean before truncation"
        note = "; ".join(n for n in (rows[0].note, said) if n)
        rows = (replace(rows[0], note=note), *rows[1:])
    return Estimates(rows)
