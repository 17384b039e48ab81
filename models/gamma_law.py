"""The gamma law of a link's weight."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.models.flow_distribution import checked_levels, checked_parameter
from steelyard.models.intervals import log_narrow_integral
from steelyard.models.measure import Measure
from steelyard.models.quantiles import smallest_weight
from steelyard.models.special import deviance_term, log_difference, stirling_error
from steelyard.models.tails import log_gamma_tails

__all__ = ["GammaLinkLaw"]

_HALF_LOG_TWO_PI = 0.9189385332046727418
_SMALLEST_WEIGHT = float(np.finfo(np.float64).tiny)
_EXPANSION_FROM = 1e6  # shapes from which the start of a quantile's search is a cubed normal quantile


@dataclass(frozen=True, eq=False)
class GammaLinkLaw:
    """Weight of a link with a gamma law of variance alpha mean^2; the density is in w.

    Parameters
    ----------
    mean : (n,) array, finite, > 0
    dispersion : (n,) array or one number alpha, finite, > 0; the shape is 1 / alpha

    Raises
    ------
    ModelError
        if a number is not finite or not above 0.
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
        """(n,) alpha mean^2; infinite where that overflows."""
        with np.errstate(over="ignore"):
            return self.dispersion * self.mean * self.mean

    @property
    def shape(self) -> Floats:
        """(n,) 1 / alpha."""
        return np.asarray(1.0 / self.dispersion)

    def log_density(self, weights: Floats, /) -> Floats:
        """Log density in w; minus infinity at 0 and below."""
        positive = (weights > 0.0) & np.isfinite(weights)
        w = np.where(positive, weights, self.mean)
        return np.where(positive, self._log_density_of_log(w) - np.log(w), -np.inf)

    def _log_density_of_log(self, weights: Floats) -> Floats:
        """Log density of log w at w > 0: its two large terms have cancelled into a deviance and a Stirling error."""
        shape = self.shape
        with np.errstate(over="ignore"):
            deviance = deviance_term(np.ones_like(weights), weights / self.mean)
            constant = 0.5 * np.log(shape) - _HALF_LOG_TWO_PI - stirling_error(shape)
            return constant - shape * deviance

    def log_interval(self, lower: Floats, upper: Floats, /) -> Floats:
        """Log of P(lower < w <= upper) for 0 <= lower < upper, exact in both tails and narrow intervals."""
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
            below_a, above_a = log_gamma_tails(self.shape, lower / self.mean)
            below_b, above_b = log_gamma_tails(self.shape, upper / self.mean)
            heavy = below_a > above_a  # the smaller tail is the one with digits
            log_probability = log_difference(
                np.where(heavy, above_a, below_b), np.where(heavy, above_b, below_a)
            )
            width = np.log1p((upper - lower) / lower)
            narrow = self._is_narrow(lower, upper, width)
        if narrow.any():
            law = GammaLinkLaw(self.mean[narrow], np.asarray(self.dispersion)[narrow])
            start = lower[narrow]

            def log_density(move: Floats) -> Floats:
                return law._log_density_of_log(start * np.exp(move))

            log_probability[narrow] = log_narrow_integral(log_density, np.zeros_like(start), width[narrow])
        return log_probability

    def _is_narrow(self, lower: Floats, upper: Floats, width: Floats) -> Bools:
        """Where the log density of log w changes by less than about one; `width` is that of log w."""
        steepest = self.shape * np.maximum(np.abs(lower / self.mean - 1.0), np.abs(upper / self.mean - 1.0))
        bend = self.shape * np.maximum(1.0, upper / self.mean)
        gentle = (width < 1.0) & (width * steepest < 1.0) & (width * width * bend < 1.0)
        return np.asarray(gentle & (lower > 0.0))

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        return _cdf(np.asarray(weights, dtype=np.float64), self.mean, self.shape)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest weight whose cdf reaches the level; infinite at level 1."""
        levels = checked_levels(level, len(self.mean))
        mean, shape = self.mean, self.shape

        def cdf(weights: Floats, which: Integers) -> Floats:
            return _cdf(weights, mean[which], shape[which])

        guess = self._near_quantile(np.minimum(levels, 1.0 - 2.0**-53))
        return smallest_weight(cdf, levels, guess, np.full_like(guess, np.inf), whole=False)

    def _near_quantile(self, levels: Floats) -> Floats:
        """The library's quantile, or for large shapes the cube of a normal one, and then one Newton step."""
        shape = self.shape
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
            share = 1.0 / (9.0 * shape)
            ratio = (1.0 - share + special.ndtri(levels) * np.sqrt(share)) ** 3
            plain = shape < _EXPANSION_FROM
            ratio[plain] = special.gammaincinv(shape[plain], levels[plain]) / shape[plain]
            guess = np.maximum(ratio, 0.0) * self.mean
            step = (levels - self.cdf(guess)) / np.exp(self.log_density(guess))
            usable = np.abs(step) < 0.1 * guess
        return np.asarray(np.where(usable, guess + np.where(usable, step, 0.0), guess))

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) weights; a draw that underflows is the smallest weight there is, for a link has one."""
        shape = self.shape
        # Gamma(a) = Gamma(a + 1) U^(1 / a): small shapes draw far below what the plain generator can hold.
        logs = np.log(rng.standard_gamma(shape + 1.0, (size, len(shape))))
        logs -= rng.standard_exponential((size, len(shape))) / shape
        with np.errstate(over="ignore", under="ignore"):
            drawn = np.exp(logs - np.log(shape) + np.log(self.mean))
        return np.asarray(np.maximum(drawn, _SMALLEST_WEIGHT))


def _cdf(weights: Floats, mean: Floats, shape: Floats) -> Floats:
    """Probability of at most `weights`, 0 up to 0."""
    with np.errstate(over="ignore"):
        ratio = np.maximum(weights, 0.0) / mean
    lower, upper = log_gamma_tails(shape, ratio)
    return np.where(lower < upper, np.exp(lower), -np.expm1(upper))
