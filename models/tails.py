"""Distribution functions of counts that hold at large means, where the library routines drift.

The incomplete gamma function of scipy 1.17 sums a bounded number of terms: five standard deviations out it
misses the tail by 5e-6 of its value at a mean of 1e6, and by a third at 1e8. Above 1e5 Temme's uniform
expansion takes its place [1]_. The incomplete beta function is right while its argument is the
smaller of p and 1 - p.

References
----------
.. [1] Temme, N. M. (1979). The asymptotic expansion of the incomplete gamma functions. SIAM Journal
   on Mathematical Analysis 10. The coefficients follow from the recursion in NIST Digital Library of
   Mathematical Functions, 8.12.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Floats
from steelyard.models.special import deviance_term

__all__ = [
    "TEMME_COEFFICIENTS",
    "gamma_upper",
    "negative_binomial_cdf",
    "negative_binomial_survival",
    "poisson_cdf",
    "poisson_survival",
]

#: Powers of eta (along a row) in the terms of order 1, 1/a and 1/a^2 of Temme's expansion.
TEMME_COEFFICIENTS: tuple[tuple[float, ...], ...] = (
    (
        -0.3333333333333333,
        0.08333333333333333,
        -0.014814814814814815,
        0.0011574074074074073,
        0.0003527336860670194,
        -0.0001787551440329218,
        3.919263178522438e-05,
        -2.185448510679992e-06,
        -1.85406221071516e-06,
        8.296711340953087e-07,
    ),
    (
        -0.001851851851851852,
        -0.003472222222222222,
        0.0026455026455026454,
        -0.0009902263374485596,
        0.00020576131687242798,
    ),
    (0.004133597883597883, -0.0026813271604938273, 0.0007716049382716049),
)

_TEMME_FROM = 1e5
_POISSON_FROM = 1e20  # sizes this many times the mean: the negative binomial is Poisson to all digits


def _gamma_upper_large(a: Floats, x: Floats) -> Floats:
    """Regularised upper incomplete gamma function for a >= 1e5, x >= 0; absolute error about 1e-15."""
    squared = 2.0 * deviance_term(a, x)  # a eta^2
    z = np.copysign(np.sqrt(squared), x - a)
    # beyond |eta| = 0.2 the correction is below 1e-800, so the polynomials need not hold there
    eta = np.clip(z / np.sqrt(a), -0.2, 0.2)
    series = np.zeros_like(eta)
    for row in reversed(TEMME_COEFFICIENTS):
        series = series / a + np.polynomial.polynomial.polyval(eta, row)
    with np.errstate(under="ignore"):
        upper: Floats = special.ndtr(-z) + np.exp(-0.5 * squared) / np.sqrt(2.0 * np.pi * a) * series
    return np.clip(upper, 0.0, 1.0)


def gamma_upper(a: Floats, x: Floats, /) -> Floats:
    """Regularised upper incomplete gamma function Q(a, x) for a > 0, x >= 0, arrays of one shape."""
    upper: Floats = special.gammaincc(np.minimum(a, _TEMME_FROM), x)
    large = a > _TEMME_FROM
    if large.any():
        upper[large] = _gamma_upper_large(a[large], x[large])
    return upper


def poisson_cdf(weights: Floats, mean: Floats, /) -> Floats:
    """Probability of at most `weights` under Poisson laws.

    Parameters
    ----------
    weights : (..., n) array, any number; 0 below zero, 1 at infinity
    mean : (n,) array, finite, >= 0

    Returns
    -------
    array of the joint shape, within [0, 1], never nan for a weight that is a number.
    """
    floor, mean = np.broadcast_arrays(np.floor(np.asarray(weights, dtype=np.float64)), mean)
    inside = (floor >= 0.0) & np.isfinite(floor)
    probability = gamma_upper(np.where(inside, floor, 0.0) + 1.0, mean)
    return np.where(inside, probability, np.where(floor > 0.0, 1.0, 0.0))


def _beta_tails(w: Floats, m: Floats, r: Floats, *, upper: bool) -> Floats:
    """P(W <= w), or P(W > w), as incomplete beta functions of the smaller of the two shares of m + r.

    The small share carries its digits, one minus the other does not.
    """
    of_mean, of_size = (special.betainc, special.betaincc) if upper else (special.betaincc, special.betainc)
    tail = np.empty_like(w)
    low = m < r
    tail[low] = of_mean(w[low] + 1.0, r[low], m[low] / (m[low] + r[low]))
    low = ~low
    tail[low] = of_size(r[low], w[low] + 1.0, r[low] / (m[low] + r[low]))
    return tail


def poisson_survival(weights: Floats, mean: Floats, /) -> Floats:
    """Probability of more than `weights` >= 0 under Poisson laws with means up to 1e5, digits kept where small."""
    return np.asarray(special.gammainc(np.floor(weights) + 1.0, mean))


def negative_binomial_survival(weights: Floats, mean: Floats, size: Floats, /) -> Floats:
    """Probability of more than `weights` >= 0, digits kept where it is small; arrays of one shape, size finite."""
    return _beta_tails(np.floor(weights), mean, size, upper=True)


def negative_binomial_cdf(weights: Floats, mean: Floats, size: Floats, /) -> Floats:
    """Probability of at most `weights` under negative binomial laws with variance ``mean + mean^2 / size``.

    Parameters
    ----------
    weights : (..., n) array, any number; 0 below zero, 1 at infinity
    mean : (n,) array, finite, >= 0
    size : (n,) array, > 0 where the mean is; infinity gives the Poisson law

    Returns
    -------
    array of the joint shape, within [0, 1], never nan for a weight that is a number.
    """
    weights, mean, size = np.broadcast_arrays(np.asarray(weights, dtype=np.float64), mean, size)
    mixed = (mean > 0.0) & (size < _POISSON_FROM * np.maximum(mean, 1.0))
    floor = np.floor(weights)
    inside = (floor >= 0.0) & np.isfinite(floor)
    probability = np.where(floor >= 0.0, 1.0, 0.0)
    few = mixed & inside
    probability[few] = _beta_tails(floor[few], mean[few], size[few], upper=False)
    rest = ~mixed
    if rest.any():
        probability[rest] = poisson_cdf(weights[rest], mean[rest])
    return probability
