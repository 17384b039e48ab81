"""The gamma law of a link's weight, with interval probabilities that hold far out in both tails."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.models.flow_distribution import checked_levels, checked_parameter
from steelyard.models.intervals import log_narrow_integral
from steelyard.models.measure import Measure
from steelyard.models.quantiles import smallest_weight
from steelyard.models.special import log_difference, stirling_error
from steelyard.models.tails import gamma_upper

__all__ = ["GammaLinkLaw"]

_HALF_LOG_TWO_PI = 0.9189385332046727418
_UNDERFLOW = 1e-290
_TERMS = 500


def _log_density_of_log(t: Floats, shape: Floats) -> Floats:
    """Log density of t = log(w / mean): -shape (e^t - 1 - t) and what normalises it, without large terms."""
    with np.errstate(over="ignore"):
        rise = np.expm1(t)
    near = np.abs(t) < 0.03
    series = t * t * (1 / 2 + t * (1 / 6 + t * (1 / 24 + t * (1 / 120 + t * (1 / 720 + t / 5040)))))
    gap = np.where(near, series, rise - t)
    return -shape * gap + 0.5 * np.log(shape) - _HALF_LOG_TWO_PI - stirling_error(shape)


def _log_lower(shape: Floats, x: Floats, log_term: Floats) -> Floats:
    """Log P(shape, x) by its power series x^a e^-x / Gamma(a + 1) (1 + x / (a + 1) + ...); for x < shape."""
    total, term = np.ones_like(x), np.ones_like(x)
    for n in range(1, _TERMS):
        term = term * x / (shape + n)
        total += term
        if float((term / total).max(initial=0.0)) < 1e-17:
            break
    return np.asarray(log_term - np.log(shape) + np.log(total))


def _log_upper(shape: Floats, x: Floats, log_term: Floats) -> Floats:
    """Log Q(shape, x) by its continued fraction (Lentz); for x > shape + 1."""
    b = x + 1.0 - shape
    c = np.full_like(x, 1e300)
    d = 1.0 / b
    fraction = d.copy()
    for n in range(1, _TERMS):
        a = -n * (n - shape)
        b = b + 2.0
        d = 1.0 / (a * d + b)
        c = b + a / c
        change = c * d
        fraction *= change
        if float(np.abs(change - 1.0).max(initial=0.0)) < 1e-15:
            break
    return np.asarray(log_term + np.log(fraction))


@dataclass(frozen=True, eq=False)
class GammaLinkLaw:
    """Weight of a link: gamma with the given mean and variance dispersion x mean^2.

    Parameters
    ----------
    mean : (n,) array, finite, > 0
    dispersion : (n,) array or one number, finite, > 0: one over the shape

    Raises
    ------
    ModelError
        if a number is not finite, or not above 0.
    """

    mean: Floats
    dispersion: float | Floats

    def __post_init__(self) -> None:
        mean = checked_parameter("Gamma mean", self.mean, above=0.0)
        dispersion = checked_parameter("Dispersion", self.dispersion, len(mean), above=0.0)
        object.__setattr__(self, "mean", mean)
        object.__setattr__(self, "dispersion", dispersion)

    @property
    def measure(self) -> Measure:
        """Amounts."""
        return Measure.AMOUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) ones: the law is about links."""
        return np.ones_like(self.mean)

    @property
    def variance(self) -> Floats:
        """(n,) dispersion x mean^2; infinite where that overflows."""
        with np.errstate(over="ignore"):
            return np.asarray(self.dispersion * self.mean**2)

    @property
    def _shape(self) -> Floats:
        return np.asarray(1.0 / np.asarray(self.dispersion))

    def _log_ratio(self, weights: Floats) -> Floats:
        """log(w / mean): from the exact difference where the two are close, so that a large shape keeps digits."""
        w = np.asarray(weights, dtype=np.float64)
        with np.errstate(divide="ignore", over="ignore"):
            step = (w - self.mean) / self.mean
            return np.where(
                np.abs(step) < 0.5, np.log1p(np.maximum(step, -0.5)), np.log(w) - np.log(self.mean)
            )

    def log_density(self, weights: Floats, /) -> Floats:
        """Log density in w; minus infinity at 0 and below."""
        positive = (weights > 0.0) & np.isfinite(weights)
        w = np.where(positive, weights, 1.0)
        density = _log_density_of_log(self._log_ratio(w), self._shape) - np.log(w)
        return np.where(positive, density, -np.inf)

    def log_interval(self, lower: Floats, upper: Floats, /) -> Floats:
        """Log of P(lower < w <= upper) for 0 <= lower < upper, exact in both tails and narrow intervals."""
        shape = self._shape
        below, above = self._log_tails(lower), self._log_tails(upper)
        flip = lower > self.mean
        larger, smaller = np.where(flip, below[1], above[0]), np.where(flip, above[1], below[0])
        log_probability = log_difference(larger, smaller)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            width = np.log1p((upper - lower) / lower)
            a, b = self._log_ratio(lower), self._log_ratio(upper)
            steepness = shape * np.maximum(np.abs(np.expm1(a)), np.abs(np.expm1(b)))
            narrow = width * (1.0 + steepness + np.sqrt(shape * np.exp(np.maximum(b, 0.0)))) < 1.0
        if narrow.any():
            of_some = shape[narrow]
            log_probability[narrow] = log_narrow_integral(
                lambda t: _log_density_of_log(t, of_some), a[narrow], width[narrow]
            )
        return log_probability

    def _log_tails(self, weights: Floats) -> tuple[Floats, Floats]:
        """Log probability of at most, and of more than, each weight; both keep digits where they underflow."""
        shape = self._shape
        with np.errstate(over="ignore", invalid="ignore"):
            x = np.where(np.isfinite(weights), shape * (weights / self.mean), np.inf)
        upper = gamma_upper(shape, x)
        lower = np.where(shape > 1e5, 1.0 - upper, special.gammainc(shape, x))
        with np.errstate(divide="ignore"):
            log_lower, log_upper = np.log(lower), np.log(upper)
        deep: Bools = (lower < _UNDERFLOW) & (x > 0.0)
        if deep.any():
            log_lower[deep] = _log_lower(shape[deep], x[deep], self._log_term(weights, deep))
        deep = (upper < _UNDERFLOW) & np.isfinite(x)
        if deep.any():
            log_upper[deep] = _log_upper(shape[deep], x[deep], self._log_term(weights, deep))
        # The small tail holds the digits of the other one.
        log_lower = np.where(upper < 0.5, np.log1p(-np.minimum(upper, 0.5)), log_lower)
        log_upper = np.where(lower < 0.5, np.log1p(-np.minimum(lower, 0.5)), log_upper)
        return log_lower, log_upper

    def _log_term(self, weights: Floats, which: Bools) -> Floats:
        """log(x^shape e^-x / Gamma(shape)), which is the log density of log w."""
        return _log_density_of_log(self._log_ratio(weights)[which], self._shape[which])

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        with np.errstate(over="ignore"):
            x = self._shape * (np.maximum(weights, 0.0) / self.mean)
        shape = np.broadcast_to(self._shape, x.shape)
        finite = np.isfinite(x)
        x = np.where(finite, x, 1.0)
        lower = np.where(shape > 1e5, 1.0 - gamma_upper(shape, x), special.gammainc(shape, x))
        return np.where(finite, lower, 1.0)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest weight whose cdf reaches the level; infinite at level 1."""
        levels = checked_levels(level, len(self.mean))
        shape, mean = self._shape, self.mean
        guess = special.gammaincinv(shape, levels) * (mean / shape)

        def cdf(weights: Floats, which: Integers) -> Floats:
            return GammaLinkLaw(mean[which], 1.0 / shape[which]).cdf(weights)

        return smallest_weight(cdf, levels, guess, np.full_like(guess, np.inf), whole=False)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) weights."""
        shape = self._shape
        return np.asarray(
            rng.standard_gamma(np.broadcast_to(shape, (size, len(shape)))) * (self.mean / shape)
        )
