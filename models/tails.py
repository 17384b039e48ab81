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
from steelyard.models.special import deviance_term, stirling_error

__all__ = [
    "TEMME_COEFFICIENTS",
    "log_gamma_tails",
    "negative_binomial_cdf",
    "negative_binomial_upper",
    "poisson_cdf",
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
_TEMME_ETA = 0.2
_LEAST_PROBABILITY = 1e-280  # below, a probability may have underflowed and its logarithm is worked out apart
_HALF_LOG_TWO_PI = 0.9189385332046727418
_MOST_TERMS = 10_000
_POISSON_FROM = 1e20  # sizes this many times the mean: the negative binomial is Poisson to all digits


def _temme_series(a: Floats, eta: Floats) -> Floats:
    """Sum of Temme's expansion in powers of 1 / a."""
    series = np.zeros_like(eta)
    for row in reversed(TEMME_COEFFICIENTS):
        series = series / a + np.polynomial.polynomial.polyval(eta, row)
    return series


def _gamma_upper_large(a: Floats, x: Floats) -> Floats:
    """Regularised upper incomplete gamma function for a >= 1e5, x >= 0; absolute error about 1e-15."""
    squared = 2.0 * deviance_term(a, x)  # a eta^2
    z = np.copysign(np.sqrt(squared), x - a)
    # beyond |eta| = 0.2 the correction is below 1e-800, so the polynomials need not hold there
    series = _temme_series(a, np.clip(z / np.sqrt(a), -_TEMME_ETA, _TEMME_ETA))
    with np.errstate(under="ignore"):
        upper: Floats = special.ndtr(-z) + np.exp(-0.5 * squared) / np.sqrt(2.0 * np.pi * a) * series
    return np.clip(upper, 0.0, 1.0)


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
    a = np.where(inside, floor, 0.0) + 1.0
    probability: Floats = special.gammaincc(np.minimum(a, _TEMME_FROM), mean)
    large = a > _TEMME_FROM
    if large.any():
        probability[large] = _gamma_upper_large(a[large], mean[large])
    return np.where(inside, probability, np.where(floor > 0.0, 1.0, 0.0))


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
    probability = np.where(inside, 1.0, np.where(floor > 0.0, 1.0, 0.0))
    few = mixed & inside
    w, m, r = floor[few], mean[few], size[few]
    # the small one of the two shares carries its digits, one minus the other does not
    mixture = np.empty_like(w)
    low = m < r
    mixture[low] = special.betaincc(w[low] + 1.0, r[low], m[low] / (m[low] + r[low]))
    low = ~low
    mixture[low] = special.betainc(r[low], w[low] + 1.0, r[low] / (m[low] + r[low]))
    probability[few] = mixture
    rest = ~mixed
    if rest.any():
        probability[rest] = poisson_cdf(weights[rest], mean[rest])
    return probability


def negative_binomial_upper(weights: Floats, mean: Floats, size: Floats, /) -> Floats:
    """Probability of more than `weights`, to full relative precision where it is small.

    Parameters
    ----------
    weights : (..., n) array of whole numbers >= 0, or infinity
    mean : (n,) array, finite, > 0
    size : (n,) array, > 0; infinity gives the Poisson law

    Returns
    -------
    array of the joint shape, within [0, 1].
    """
    weights, mean, size = np.broadcast_arrays(np.asarray(weights, dtype=np.float64), mean, size)
    upper = np.zeros(weights.shape)
    inside = (weights >= 0.0) & (weights < np.inf)
    mixed = inside & (size < _POISSON_FROM * np.maximum(mean, 1.0))
    w, m, r = weights[mixed], mean[mixed], size[mixed]
    low = m < r
    probability = np.empty_like(w)
    probability[low] = special.betainc(w[low] + 1.0, r[low], m[low] / (m[low] + r[low]))
    low = ~low
    probability[low] = special.betaincc(r[low], w[low] + 1.0, r[low] / (m[low] + r[low]))
    upper[mixed] = probability
    rest = inside & ~mixed
    upper[rest] = special.gammainc(weights[rest] + 1.0, mean[rest])
    return upper


def log_gamma_tails(shape: Floats, ratio: Floats, /) -> tuple[Floats, Floats]:
    """Logarithms of both tails of a gamma law, each to full relative precision however small it is.

    Parameters
    ----------
    shape : (n,) array, finite, > 0
    ratio : (n,) array >= 0, a weight divided by the mean of its law; may be infinite

    Returns
    -------
    (n,) arrays: log P(weight <= ratio x mean) and log P(weight > ratio x mean).
    """
    shape, ratio = np.broadcast_arrays(shape, np.asarray(ratio, dtype=np.float64))
    lower, upper = np.full(shape.shape, -np.inf), np.zeros(shape.shape)
    lower[ratio == np.inf], upper[ratio == np.inf] = 0.0, -np.inf
    inside = (ratio > 0.0) & (ratio < np.inf)
    a, r = shape[inside], ratio[inside]
    large = (a > _TEMME_FROM) & (2.0 * _shortfall(r) < _TEMME_ETA**2)
    low, high = np.empty_like(a), np.empty_like(a)
    low[large], high[large] = _log_tails_large(a[large], r[large])
    low[~large], high[~large] = _log_tails_plain(a[~large], r[~large])
    lower[inside], upper[inside] = low, high
    return lower, upper


def _log_tails_large(a: Floats, ratio: Floats) -> tuple[Floats, Floats]:
    """Both log tails by Temme's expansion, the correction taken relative to the normal tail."""
    z = np.copysign(np.sqrt(2.0 * a * _shortfall(ratio)), ratio - 1.0)
    share = _temme_series(a, z / np.sqrt(a)) / np.sqrt(a)
    log_density = -0.5 * z * z - _HALF_LOG_TWO_PI
    lower, upper = special.log_ndtr(z), special.log_ndtr(-z)
    with np.errstate(over="ignore", invalid="ignore", under="ignore"):
        below = np.log1p(-share * np.exp(np.minimum(log_density - lower, 700.0)))
        above = np.log1p(share * np.exp(np.minimum(log_density - upper, 700.0)))
    return lower + below, upper + above


def _shortfall(ratio: Floats) -> Floats:
    """ratio - 1 - log(ratio)."""
    return deviance_term(np.ones_like(ratio), ratio)


def _log_tails_plain(a: Floats, ratio: Floats) -> tuple[Floats, Floats]:
    """Both log tails by the incomplete gamma functions, or by series where those underflow."""
    with np.errstate(over="ignore", under="ignore"):
        x = a * ratio
        below, above = special.gammainc(a, x), special.gammaincc(a, x)
    tails: list[Floats] = []
    for tail, other, small in ((below, above, _log_lower_series), (above, below, _log_upper_fraction)):
        with np.errstate(divide="ignore"):
            log_tail = np.where(other < 0.5, np.log1p(-other), np.log(tail))
        few = tail < _LEAST_PROBABILITY
        log_tail[few] = small(a[few], ratio[few])
        tails.append(log_tail)
    return tails[0], tails[1]


def _log_kernel(a: Floats, ratio: Floats) -> Floats:
    """log of x^a exp(-x) / Gamma(a + 1) with x = a ratio: a deviance and a Stirling error, no large terms."""
    return -a * _shortfall(ratio) - 0.5 * np.log(a) - _HALF_LOG_TWO_PI - stirling_error(a)


def _log_lower_series(a: Floats, ratio: Floats) -> Floats:
    """log P(a, x) for x well below a: kernel times 1 + x / (a + 1) + x^2 / ((a + 1) (a + 2)) + ..."""
    x = a * ratio
    total, term = np.ones_like(x), np.ones_like(x)
    for k in range(1, _MOST_TERMS):
        term = term * x / (a + k)
        total += term
        if (term <= 1e-17 * total).all():
            break
    return _log_kernel(a, ratio) + np.log(total)


def _log_upper_fraction(a: Floats, ratio: Floats) -> Floats:
    """log Q(a, x) for x well above a: kernel times a over Legendre's continued fraction, by Lentz's method."""
    x = np.minimum(a * ratio, 1e300)
    b = x + 1.0 - a
    c, d = np.full_like(x, 1e300), 1.0 / b
    total = d.copy()
    for k in range(1, _MOST_TERMS):
        step = -k * (k - a)
        b = b + 2.0
        d = 1.0 / (step * d + b)
        c = b + step / c
        total *= c * d
        if (np.abs(c * d - 1.0) <= 1e-16).all():
            break
    return _log_kernel(a, ratio) + np.log(a) + np.log(total)
