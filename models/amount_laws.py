"""Laws of amounts: the lognormal law of a link's weight."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Floats, Integers
from steelyard.models.flow_distribution import checked_levels, checked_parameter
from steelyard.models.intervals import log_narrow_integral
from steelyard.models.measure import Measure
from steelyard.models.quantiles import smallest_weight
from steelyard.models.special import log_difference

__all__ = ["LognormalLinkLaw"]

_HALF_LOG_TWO_PI = 0.9189385332046727418


def _log_normal_density(z: Floats) -> Floats:
    """Log density of the standard normal law."""
    return -0.5 * z * z - _HALF_LOG_TWO_PI


@dataclass(frozen=True, eq=False)
class LognormalLinkLaw:
    """Weight of a link whose logarithm is normal; the density is in w, not in log w.

    Parameters
    ----------
    log_location : (n,) array, finite: mean of log w
    log_scale : (n,) array or one number, finite, > 0: standard deviation of log w

    Raises
    ------
    ModelError
        if a number is not finite, or a scale is not above 0.
    """

    log_location: Floats
    log_scale: float | Floats

    def __post_init__(self) -> None:
        location = checked_parameter("Location of log weights", self.log_location)
        scale = checked_parameter("Scale of log weights", self.log_scale, len(location), above=0.0)
        object.__setattr__(self, "log_location", location)
        object.__setattr__(self, "log_scale", scale)

    @property
    def measure(self) -> Measure:
        """Amounts."""
        return Measure.AMOUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) ones: the law is about links."""
        return np.ones_like(self.log_location)

    @property
    def mean(self) -> Floats:
        """(n,) exp(location + scale^2 / 2); infinite where that overflows."""
        with np.errstate(over="ignore"):
            return np.exp(self.log_location + 0.5 * np.square(self.log_scale))

    @property
    def variance(self) -> Floats:
        """(n,) (exp(scale^2) - 1) exp(2 location + scale^2); infinite where that overflows."""
        with np.errstate(over="ignore", divide="ignore"):
            square = np.square(self.log_scale)
            return np.exp(2.0 * self.log_location + square + log_difference(square, np.zeros_like(square)))

    def _standardised(self, weights: Floats) -> Floats:
        """(log w - location) / scale; minus infinity at 0, nan below."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return (np.log(np.asarray(weights, dtype=np.float64)) - self.log_location) / self.log_scale

    def log_density(self, weights: Floats, /) -> Floats:
        """Log density in w; minus infinity at 0 and below."""
        positive = (weights > 0.0) & np.isfinite(weights)
        w = np.where(positive, weights, 1.0)
        density = _log_normal_density(self._standardised(w)) - np.log(self.log_scale) - np.log(w)
        return np.where(positive, density, -np.inf)

    def log_interval(self, lower: Floats, upper: Floats, /) -> Floats:
        """Log of P(lower < w <= upper) for 0 <= lower < upper, exact in both tails and narrow intervals."""
        a, b = self._standardised(lower), self._standardised(upper)
        flip = a > 0.0  # the normal law is symmetric, and its lower tail is the one with digits
        near, far = np.where(flip, -a, b), np.where(flip, -b, a)
        log_probability = log_difference(special.log_ndtr(near), special.log_ndtr(far))
        with np.errstate(divide="ignore", invalid="ignore"):
            width = np.log1p((upper - lower) / lower) / self.log_scale
            narrow = width * (1.0 + np.maximum(np.abs(a), np.abs(b))) < 1.0
        if narrow.any():
            log_probability[narrow] = log_narrow_integral(_log_normal_density, a[narrow], width[narrow])
        return log_probability

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        return np.asarray(special.ndtr(self._standardised(np.maximum(weights, 0.0))))

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest weight whose cdf reaches the level; infinite at level 1."""
        levels = checked_levels(level, len(self.log_location))
        with np.errstate(over="ignore"):
            guess = np.exp(self.log_location + self.log_scale * special.ndtri(levels))
        location, scale = self.log_location, np.asarray(self.log_scale)

        def cdf(weights: Floats, which: Integers) -> Floats:
            with np.errstate(divide="ignore"):
                probability: Floats = special.ndtr((np.log(weights) - location[which]) / scale[which])
            return probability

        return smallest_weight(cdf, levels, guess, np.full_like(guess, np.inf), whole=False)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) weights; infinite where one overflows."""
        z = rng.standard_normal((size, len(self.log_location)))
        with np.errstate(over="ignore"):
            return np.exp(self.log_location + self.log_scale * z)
