"""Negative-binomial regression of counts on all dyads: variance mean + alpha mean^2, or mean (1 + alpha)."""

from __future__ import annotations

from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import DispersionForm, NegativeBinomialLaw
from steelyard.models.errors import ModelError
from steelyard.models.estimates import Estimate, EstimatePart, Estimates, Status
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import NegativeBinomialQuadratic, Poisson
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs, scale_estimate
from steelyard.models.measure import Measure
from steelyard.models.negative_binomial_linear import NegativeBinomialLinear
from steelyard.models.special import poisson_log_mass

__all__ = ["FittedNegativeBinomial", "NegativeBinomialModel", "fit_negative_binomial"]

_FORMS = MappingProxyType({1: DispersionForm.LINEAR, 2: DispersionForm.QUADRATIC})


@dataclass(frozen=True)
class FittedNegativeBinomial:
    """Mean exp(index) on every dyad, and variance mean + alpha mean^2 or mean (1 + alpha)."""

    index: LinearIndex
    alpha: float
    form: DispersionForm
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.COUNTS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return np.exp(self.index.on(dyads))

    def distribution(self, dyads: Dyads, /) -> NegativeBinomialLaw:
        return NegativeBinomialLaw(self.expected_weight(dyads), self.alpha, self.form)


def fit_negative_binomial(
    response: Floats,
    design: Floats,
    pairs: NodePairs | None = None,
    form: DispersionForm = DispersionForm.QUADRATIC,
) -> IndexFit:
    """Fit plain arrays; the second index is the constant log alpha.

    Where the likelihood is highest at alpha = 0, the Poisson fit is the maximum, and it comes back with one
    index instead of two. The slope at alpha = 0 alone does not say so: the likelihood may fall there and rise
    again to a higher maximum inside, so in that case both are fitted and compared.
    """
    poisson = fit_indices(Poisson(response), [design], pairs)
    mean = _mean(poisson, design)
    falls = _slope_at_poisson(response, mean, form) <= 0.0
    if falls and len(response) - int(poisson.separated.sum()) <= poisson.rank + 1:
        return poisson
    linear = form is DispersionForm.LINEAR
    likelihood = NegativeBinomialLinear(response) if linear else NegativeBinomialQuadratic(response)
    designs = [design, np.ones((len(response), 1))]
    inside = fit_indices(likelihood, designs, pairs)
    if not inside.convergence.converged and not falls and not linear and poisson.convergence.converged:
        # Large counts that are nearly Poisson have an alpha far below what the plain start looks at.
        near = np.where(poisson.separated, 0.0, design @ poisson.coefficients[0])
        inside = fit_indices(NegativeBinomialQuadratic(response, near), designs, pairs)
    if not falls:
        return inside
    if not inside.convergence.converged:
        return poisson
    law = NegativeBinomialLaw(_mean(inside, design), float(np.exp(inside.coefficients[1][0])), form)
    gain = law.log_density(response) - poisson_log_mass(response, mean)
    return inside if float(gain.sum()) > 0.0 else poisson


def _slope_at_poisson(response: Floats, mean: Floats, form: DispersionForm) -> float:
    """Slope of the log-likelihood in alpha at alpha = 0, times two; separated observations, of mean 0, add none."""
    excess = (response - mean) ** 2 - response
    if form is DispersionForm.LINEAR:
        excess = np.divide(excess, mean, out=np.zeros_like(mean), where=mean > 0.0)
    return float(np.sum(excess))


def _mean(found: IndexFit, design: Floats) -> Floats:
    """(n,) fitted means, 0 on separated observations."""
    kept = ~found.separated
    mean = np.zeros(len(design))
    mean[kept] = np.exp(design[kept] @ found.coefficients[0])
    return mean


@dataclass(frozen=True)
class NegativeBinomialModel:
    """Counts with log-linear mean and variance mean + alpha mean^2 or mean (1 + alpha), zeros included.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant
    form : 2 for variance mean + alpha mean^2, 1 for mean (1 + alpha)

    Raises
    ------
    ModelError : the form is neither 1 nor 2
    """

    covariates: tuple[str, ...]
    form: int = 2

    name: ClassVar[str] = "negative_binomial"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.JOINT
    measure: ClassVar[Measure] = Measure.COUNTS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = (
        "Counts on every dyad, zeros included, are Poisson around a mean that itself varies (gamma) from dyad "
        "to dyad. In form 2, the default, the variance grows with the square of the mean; in form 1 it is a "
        "multiple of the mean."
    )
    formula: ClassVar[str] = (
        "mean m, variance m + alpha m^2 (form 2) or m (1 + alpha) (form 1),  log m = constant + sum of slope x "
        "covariate"
    )
    parameters: ClassVar[str] = "maximum likelihood; covariates + 1, and alpha unless it is at its edge 0"
    caution: ClassVar[str] = (
        "Its estimates depend on the unit of the flows. One alpha serves both the zeros and the spread of the "
        "weights, so a good fit of one may be paid for in the other."
    )
    sources: ClassVar[str] = "Cameron & Trivedi (1998); Bosquet & Boulhol (2014) on the unit"

    def __post_init__(self) -> None:
        if self.form not in _FORMS:
            raise ModelError(
                f"The form of a negative binomial must be 1, for variance m (1 + alpha), or 2, for m + alpha m^2; "
                f"got {self.form!r}."
            )

    def fit(self, dyads: Dyads, /) -> FittedNegativeBinomial:
        """Maximum likelihood on all of these dyads, zeros included."""
        form, design = _FORMS[self.form], dyads.design(self.covariates)
        found = fit_negative_binomial(dyads.counts, design, node_pairs(dyads), form)
        slopes = index_estimates(found, self.covariates, EstimatePart.JOINT)
        convergence = found.convergence
        if len(found.coefficients) == 1:
            note = "no overdispersion: the maximum is the Poisson law"
            alpha = Estimate(EstimatePart.DISPERSION, "alpha", 0.0, {}, Status.BOUNDARY, True, note)
            said = "; ".join(m for m in (convergence.message, "alpha at its edge 0") if m)
            convergence = replace(convergence, message=said)
        else:
            alpha = scale_estimate(found, 1, "alpha", EstimatePart.DISPERSION)
        return FittedNegativeBinomial(
            index=LinearIndex.of(found, self.covariates),
            alpha=alpha.value,
            form=form,
            estimates=slopes + Estimates((alpha,)),
            n_parameters=found.rank,
            convergence=convergence,
        )
