"""Negative-binomial regression of counts on all dyads, with either form of the variance."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import ClassVar

import numpy as np
from scipy.special import gammaln

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import DispersionForm, NegativeBinomialLaw
from steelyard.models.errors import ModelError
from steelyard.models.estimates import EstimatePart, Estimates
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import NegativeBinomialQuadratic, Poisson
from steelyard.models.linear_index import (
    LinearIndex,
    alpha_estimate,
    index_estimates,
    node_pairs,
    with_alpha_at_its_edge,
)
from steelyard.models.measure import Measure
from steelyard.models.negative_binomial_linear import NegativeBinomialLinear
from steelyard.models.special import log_one_plus, negative_binomial_log_mass, poisson_log_mass

__all__ = ["FittedNegativeBinomial", "NegativeBinomialModel", "fit_negative_binomial"]

# From here on it is worth showing by a bound that the Poisson fit need not be made.
BOUND_FROM = 5_000
FORMS = MappingProxyType({1: DispersionForm.LINEAR, 2: DispersionForm.QUADRATIC})


@dataclass(frozen=True)
class FittedNegativeBinomial:
    """Mean exp(index) and variance mean + alpha mean^2, or mean (1 + alpha), on every dyad."""

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
    *,
    errors: bool = True,
) -> IndexFit:
    """Fit plain arrays; the second index is the constant log alpha. Without `errors`, no covariances.

    Where the likelihood is highest at alpha = 0, the Poisson fit is the maximum, and it comes back with one
    index instead of two. The slope at alpha = 0 alone does not say so: the likelihood may fall there and rise
    again to a higher maximum inside, so in that case both are fitted and compared.
    """
    quadratic = form is DispersionForm.QUADRATIC
    inside = None
    if len(response) >= BOUND_FROM:
        inside = _inside(response, design, pairs, form, errors=errors)
        if inside.convergence.converged and _surely_above_poisson(inside, response, design, form):
            return inside
    poisson = fit_indices(Poisson(response), [design], errors=False)
    mean = _mean(poisson, design)
    falls = _slope_at_zero(response, mean, quadratic=quadratic) <= 0.0
    if falls and len(response) - int(poisson.separated.sum()) <= poisson.rank + 1:
        return fit_indices(Poisson(response), [design], pairs, errors=errors)
    if inside is None:
        inside = _inside(response, design, pairs, form, errors=errors)
    if not inside.convergence.converged and not falls and poisson.convergence.converged:
        # Large counts that are nearly Poisson have an alpha far below what the plain start looks at.
        near = np.where(poisson.separated, 0.0, design @ poisson.coefficients[0])
        inside = _inside(response, design, pairs, form, near, errors=errors)
    if not falls:
        return inside
    if inside.convergence.converged and inside.rank:
        fitted, alpha = _mean(inside, design), float(np.exp(inside.coefficients[1][0]))
        size = np.full_like(fitted, 1.0 / alpha) if quadratic else fitted / alpha
        gain = negative_binomial_log_mass(response, fitted, size) - poisson_log_mass(response, mean)
        if float(gain.sum()) > 0.0:
            return inside
    return fit_indices(Poisson(response), [design], pairs, errors=errors)


def _inside(
    response: Floats,
    design: Floats,
    pairs: NodePairs | None,
    form: DispersionForm,
    near: Floats | None = None,
    *,
    errors: bool,
) -> IndexFit:
    """The fit with a dispersion above 0; `near` is a first index to start from."""
    designs = [design, np.ones((len(response), 1))]
    return fit_indices(_likelihood(response, form, near), designs, pairs, errors=errors)


def _likelihood(
    response: Floats, form: DispersionForm, near: Floats | None = None
) -> NegativeBinomialQuadratic | NegativeBinomialLinear:
    if form is DispersionForm.QUADRATIC:
        return NegativeBinomialQuadratic(response, near)
    return NegativeBinomialLinear(response)


def _surely_above_poisson(found: IndexFit, response: Floats, design: Floats, form: DispersionForm) -> bool:
    """Whether no Poisson fit reaches this likelihood, shown by a bound that costs less than the fit.

    For any means m > 0 with the same X'm = X'w the Poisson log-likelihood of every coefficient is at most
    sum(m log m - m - log w!). One Newton step from the means at hand gives such m, if it leaves them positive.
    """
    if found.separated.any() or len(found.coefficients) < 2:
        return False
    index = design @ found.coefficients[0]
    mean = np.exp(index)
    kept = [i for i in range(design.shape[1]) if i not in found.aliased[0]]
    columns = design if len(kept) == design.shape[1] else design[:, kept]
    scale = np.abs(columns).max(axis=0)
    information = (columns.T * mean) @ columns / np.outer(scale, scale)
    try:
        step = np.linalg.solve(information, columns.T @ (response - mean) / scale) / scale
    except np.linalg.LinAlgError:
        return False
    moved = mean * (1.0 + columns @ step)
    if not (moved > 0).all():
        return False
    # Both sides without their common terms -log w!; the rounding of large weights is allowed for below.
    bound = float(moved @ np.log(moved) - moved.sum())
    alpha = float(np.exp(found.coefficients[1][0]))
    size = 1.0 / alpha if form is DispersionForm.QUADRATIC else mean / alpha
    gained = gammaln(response + size) - gammaln(size) - (response + size) * log_one_plus(mean / size)
    reached = float(gained.sum() + response @ index - (response * np.log(size)).sum())
    rounding = 1e-10 * float(response @ (1.0 + np.abs(index))) + 1e-9 * abs(reached)
    off = float(np.abs(columns.T @ (response - moved) / scale).max()) / max(1.0, float(response.sum()))
    return off < 1e-12 and bound + 1.0 + rounding < reached


def _slope_at_zero(response: Floats, mean: Floats, *, quadratic: bool) -> float:
    """Slope of the log-likelihood in alpha at alpha = 0, times two."""
    spread = (response - mean) ** 2 - response
    if quadratic:
        return float(np.sum(spread))
    return float(np.sum(spread[mean > 0] / mean[mean > 0]))


def _mean(found: IndexFit, design: Floats) -> Floats:
    """(n,) fitted means, 0 on separated observations."""
    kept = ~found.separated
    mean = np.zeros(len(design))
    mean[kept] = np.exp(design[kept] @ found.coefficients[0])
    return mean


@dataclass(frozen=True)
class NegativeBinomialModel:
    """Counts with log-linear mean and a variance above it, zeros included.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant
    form : 2 for the variance mean + alpha mean^2, 1 for mean (1 + alpha)

    Raises
    ------
    ModelError : another form
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
        "to dyad, so the variance grows with the square of the mean (form 2) or in proportion to it (form 1)."
    )
    formula: ClassVar[str] = (
        "mean m, variance m + alpha m^2 (form 2, the default) or m (1 + alpha) (form 1),  log m = constant + sum of "
        "slope x covariate"
    )
    parameters: ClassVar[str] = "maximum likelihood; covariates + 1, and alpha unless it is at its edge 0"
    caution: ClassVar[str] = (
        "Its estimates depend on the unit of the flows. One alpha serves both the zeros and the spread of the "
        "weights, so a good fit of one may be paid for in the other. Slopes of form 1 are consistent only if its law "
        "is right."
    )
    sources: ClassVar[str] = "Cameron & Trivedi (1998); Bosquet & Boulhol (2014) on the unit"

    def __post_init__(self) -> None:
        if self.form not in FORMS:
            raise ModelError(
                f"the form of a negative binomial must be 1 (variance m (1 + alpha)) or 2 (variance m + alpha m^2); "
                f"got {self.form!r}"
            )

    def fit(self, dyads: Dyads, /) -> FittedNegativeBinomial:
        """Maximum likelihood on all of these dyads, zeros included."""
        form = FORMS[self.form]
        found = fit_negative_binomial(dyads.counts, dyads.design(self.covariates), node_pairs(dyads), form)
        alpha = alpha_estimate(found, "the maximum is the Poisson law")
        return FittedNegativeBinomial(
            index=LinearIndex.of(found, self.covariates),
            alpha=alpha.value,
            form=form,
            estimates=index_estimates(found, self.covariates, EstimatePart.JOINT) + Estimates((alpha,)),
            n_parameters=found.rank,
            convergence=with_alpha_at_its_edge(found),
        )
