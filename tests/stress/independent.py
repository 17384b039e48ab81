"""The likelihoods written again, from scipy's distributions alone, with a general optimiser that looks for better.

Nothing here is shared with the package: other columns, other parameters, other formulas, numerical derivatives.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from scipy import optimize, special, stats

from steelyard.datasets import Floats

__all__ = ["LIKELIHOODS", "Likelihood", "best_found", "own_columns"]

Parts = tuple[Floats, Floats, float]  # index, second index (inflation), last parameter on the log scale


def own_columns(design: Floats) -> Floats:
    """Orthonormal columns that span a design, each of mean square 1."""
    spread = np.where(np.ptp(design, axis=0) > 0, design.std(axis=0), 1.0)
    centred = np.where(np.ptp(design, axis=0) > 0, design - design.mean(axis=0), 1.0) / spread
    left, values, _ = np.linalg.svd(centred, full_matrices=False)
    return np.asarray(left[:, values > 1e-8 * values[0]] * np.sqrt(len(design)))


def _binomial_size(mean: Floats, size: Floats) -> tuple[Floats, Floats]:
    return size, size / (size + mean)


def _negative_binomial(w: Floats, mean: Floats, size: Floats) -> Floats:
    return np.asarray(stats.nbinom.logpmf(w, *_binomial_size(mean, size)))


def _poisson(w: Floats, parts: Parts) -> Floats:
    return np.asarray(stats.poisson.logpmf(w, np.exp(parts[0])))


def _quadratic(w: Floats, parts: Parts) -> Floats:
    return _negative_binomial(w, np.exp(parts[0]), np.full(len(w), np.exp(-parts[2])))


def _linear(w: Floats, parts: Parts) -> Floats:
    mean = np.exp(parts[0])
    return _negative_binomial(w, mean, mean * np.exp(-parts[2]))


def _truncated(log_mass: Callable[[Floats, Parts], Floats]) -> Callable[[Floats, Parts], Floats]:
    def given_a_link(w: Floats, parts: Parts) -> Floats:
        zero = log_mass(np.zeros(len(w)), parts)
        seen = -np.expm1(zero)
        # Where all mass is on zero, what is left of it is rounding: such points are void.
        return np.where(seen > 1e-8, log_mass(w, parts) - np.log(seen), np.inf)

    return given_a_link


def _inflated(log_mass: Callable[[Floats, Parts], Floats]) -> Callable[[Floats, Parts], Floats]:
    def with_zeros(w: Floats, parts: Parts) -> Floats:
        count = log_mass(w, parts) + special.log_expit(-parts[1])
        return np.where(w == 0, np.logaddexp(special.log_expit(parts[1]), count), count)

    return with_zeros


def _logit(a: Floats, parts: Parts) -> Floats:
    return np.asarray(special.log_expit(np.where(a == 1, parts[0], -parts[0])))


def _probit(a: Floats, parts: Parts) -> Floats:
    return np.asarray(stats.norm.logcdf(np.where(a == 1, parts[0], -parts[0])))


def _lognormal(w: Floats, parts: Parts) -> Floats:
    return np.asarray(stats.lognorm.logpdf(w, np.exp(parts[2]), scale=np.exp(parts[0])))


def _gamma(w: Floats, parts: Parts) -> Floats:
    shape = np.exp(-parts[2])
    return np.asarray(stats.gamma.logpdf(w, shape, scale=np.exp(parts[0]) / shape))


@dataclass(frozen=True)
class Likelihood:
    """Log mass or density of each observation, and which parameters it has besides the first index.

    Attributes
    ----------
    inflation : a second index
    scale : a last parameter, held as its logarithm
    amounts : a density, which may exceed 1
    """

    log_density: Callable[[Floats, Parts], Floats]
    inflation: bool = False
    scale: bool = False
    amounts: bool = False


LIKELIHOODS: Mapping[str, Likelihood] = {
    "gamma": Likelihood(_gamma, scale=True, amounts=True),
    "logit": Likelihood(_logit),
    "lognormal": Likelihood(_lognormal, scale=True, amounts=True),
    "negative_binomial": Likelihood(_quadratic, scale=True),
    "negative_binomial form 1": Likelihood(_linear, scale=True),
    "poisson": Likelihood(_poisson),
    "probit": Likelihood(_probit),
    "truncated_negative_binomial": Likelihood(_truncated(_quadratic), scale=True),
    "truncated_poisson": Likelihood(_truncated(_poisson)),
    "zero_inflated_negative_binomial": Likelihood(_inflated(_quadratic), inflation=True, scale=True),
    "zero_inflated_poisson": Likelihood(_inflated(_poisson), inflation=True),
}


def best_found(
    likelihood: Likelihood,
    response: Floats,
    columns: Floats,
    starts: list[Floats],
    steps: int,
) -> float:
    """The highest log-likelihood that a quasi-Newton search with numerical derivatives reaches from any start.

    A start holds coefficients of the columns, then (with inflation) again, then (with a scale) its logarithm.
    """
    k = columns.shape[1]

    def minus(point: Floats) -> float:
        with np.errstate(all="ignore"):
            index = columns @ point[:k]
            inflation = columns @ point[k : 2 * k] if likelihood.inflation else index
            parts = (index, inflation, float(point[-1]) if likelihood.scale else 0.0)
            terms = likelihood.log_density(response, parts)
            # Far from the data scipy's negative binomial can return "probabilities" above 1; such points are void.
            value = -float(np.sum(terms)) if likelihood.amounts or not (terms > 1e-6).any() else np.inf
        return value if np.isfinite(value) else 1e300

    bounds = [(-700.0, 700.0)] * len(starts[0])
    if likelihood.scale:
        # Below, scipy's negative binomial loses its digits; the Poisson laws are tried by themselves.
        bounds[-1] = (-14.0, 30.0)
    best = -np.inf
    for start in starts:
        with np.errstate(all="ignore"):
            found = optimize.minimize(
                minus,
                start,
                method="L-BFGS-B",
                bounds=bounds,
                options={"maxiter": steps},
            )
        best = max(best, -float(found.fun), -minus(start))
    return best
