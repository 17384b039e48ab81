"""Laws of a link's weight as counts: zero-truncated Poisson and negative binomial, and the logarithmic series."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.models.count_laws import NegativeBinomialLaw, PoissonLaw, draw_poisson
from steelyard.models.errors import ModelError
from steelyard.models.flow_distribution import checked_levels
from steelyard.models.measure import Measure
from steelyard.models.quantiles import of_some, smallest_weight
from steelyard.models.special import negative_binomial_log_zero
from steelyard.models.tails import negative_binomial_cdf, negative_binomial_upper
from steelyard.models.truncated_mass import (
    log_series_log_mass,
    log_series_mean_excess,
    truncated_log_mass,
)

__all__ = ["LogarithmicSeriesLinkLaw", "ZeroTruncatedLaw"]

_BELOW_ONE = 1.0 - 2.0**-53
_VANISHING_SIZE = 1e-18  # a negative binomial of this size, truncated, is a logarithmic series to all digits
_LEAST_LOG_ODDS = -500.0


def _log_series_upper(weights: Floats, log_odds: Floats) -> Floats:
    """Probability of more than `weights` under logarithmic-series laws, weights finite and >= 1.

    It is the incomplete beta integral of p^w / (1 - p) over log(1 + z), which is that of a truncated negative
    binomial whose size vanishes.
    """
    z = np.exp(np.maximum(log_odds, _LEAST_LOG_ODDS))
    upper = np.empty_like(z)
    low = z < 1.0  # of p and 1 - p the smaller has the digits
    upper[low] = special.betainc(weights[low] + 1.0, _VANISHING_SIZE, z[low] / (1.0 + z[low]))
    low = ~low
    upper[low] = special.betaincc(_VANISHING_SIZE, weights[low] + 1.0, 1.0 / (1.0 + z[low]))
    return np.asarray(upper / (_VANISHING_SIZE * np.log1p(z)))


@dataclass(frozen=True, eq=False)
class ZeroTruncatedLaw:
    """A law of counts, given that the count is not zero; where its mean is 0, the count is 1.

    Parameters
    ----------
    untruncated : the law of all counts
    """

    untruncated: PoissonLaw | NegativeBinomialLaw

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def _size(self) -> Floats:
        """(n,) size of the negative binomial, infinite for the Poisson law; 1 where the mean is 0."""
        law = self.untruncated
        size = law.size if isinstance(law, NegativeBinomialLaw) else np.full_like(law.mean, np.inf)
        return np.where(law.mean > 0.0, size, 1.0)

    @property
    def _positive_mean(self) -> Floats:
        """(n,) mean of the untruncated law, and any number where that is 0."""
        return np.where(self._possible, self.untruncated.mean, 1.0)

    @property
    def _possible(self) -> Bools:
        """(n,) where the law is more than a point at 1."""
        return np.asarray(self.untruncated.mean > 0.0)

    @property
    def _log_zero(self) -> Floats:
        return negative_binomial_log_zero(self._positive_mean, self._size)

    @property
    def link_probability(self) -> Floats:
        """(n,) ones: the law is about links."""
        return np.ones_like(self.untruncated.mean)

    @property
    def mean(self) -> Floats:
        """(n,) untruncated mean over the probability of a link."""
        return np.where(self._possible, self._positive_mean / -np.expm1(self._log_zero), 1.0)

    @property
    def variance(self) -> Floats:
        """(n,) mean times (1 + c + m - mean), where c m and m are dispersion and mean before truncation."""
        law, mean = self.untruncated, self.mean
        with np.errstate(over="ignore", invalid="ignore"):
            spread = mean * (law.variance / self._positive_mean + law.mean - mean)
        return np.where(self._possible, np.maximum(spread, 0.0), 0.0)

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass; minus infinity at 0."""
        return truncated_log_mass(weights, self.untruncated.mean, self._size)

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        floor = np.floor(np.asarray(weights, dtype=np.float64))
        mean, size, log_zero = self._positive_mean, self._size, self._log_zero
        # Of the two forms the one that subtracts a small number from a large one.
        rare = log_zero > -0.693
        none, some = np.exp(log_zero), -np.expm1(log_zero)
        below = (negative_binomial_cdf(floor, mean, size) - none) / some
        above = 1.0 - negative_binomial_upper(floor, mean, size) / some
        probability = np.clip(np.where(rare, above, below), 0.0, 1.0)
        return np.where(floor >= 1.0, np.where(self._possible, probability, 1.0), 0.0)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest count whose cdf reaches the level; infinite at level 1 unless the mean is 0."""
        levels = checked_levels(level, len(self._size))
        none, some = np.exp(self._log_zero), -np.expm1(self._log_zero)
        guess = np.maximum(self.untruncated.quantile(np.minimum(none + some * levels, _BELOW_ONE)), 1.0)
        top = np.where(self._possible, np.inf, 1.0)
        return smallest_weight(of_some(self.cdf, len(levels)), levels, guess, top, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) counts: the first unit arrives at some time before one, and the rest after it.

        The units of a count may be seen as arriving over a unit of time, at a rate that is gamma (negative
        binomial) or fixed (Poisson). Given that one arrives, the time of the first is drawn by inversion; given
        that time, the rate is gamma again with one more unit of shape.
        """
        mean, r = self._positive_mean, self._size
        shape = np.minimum(r, 1e100)
        uniform = rng.random((size, len(mean)))
        waited = -np.log1p(uniform * np.expm1(self._log_zero))
        with np.errstate(over="ignore"):
            waited = np.minimum(shape * np.expm1(waited / shape), mean)
        rate = rng.standard_gamma(np.broadcast_to(shape + 1.0, waited.shape))
        later = rate / (shape + waited) * (mean - waited)
        return np.where(self._possible, 1.0 + draw_poisson(rng, later), 1.0)


@dataclass(frozen=True, eq=False)
class LogarithmicSeriesLinkLaw:
    """Weight of a link on 1, 2, ... with probability p^w / (w log(1 + z)), p = z / (1 + z).

    It is what is left of a zero-truncated negative binomial when alpha grows without end and alpha times the
    untruncated mean tends to z. Where z is 0, the weight is 1.

    Parameters
    ----------
    log_odds : (n,) array of log z = log p / (1 - p); minus infinity allowed

    Raises
    ------
    ModelError
        if a number is nan, or so large that z overflows.
    """

    log_odds: Floats

    def __post_init__(self) -> None:
        log_odds = np.asarray(self.log_odds, dtype=np.float64)
        bad = ~(log_odds < 700.0)
        if log_odds.ndim != 1 or bad.any():
            raise ModelError(
                f"Log odds of a logarithmic-series law must be one number below 700 for each dyad; got shape "
                f"{log_odds.shape} with {bad.sum()} outside: look for covariates far outside the range of the fit."
            )
        object.__setattr__(self, "log_odds", log_odds)

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) ones: the law is about links."""
        return np.ones_like(self.log_odds)

    @property
    def mean(self) -> Floats:
        """(n,) z / log(1 + z)."""
        return 1.0 + log_series_mean_excess(self.log_odds)

    @property
    def variance(self) -> Floats:
        """(n,) mean times (1 + z - mean)."""
        excess = log_series_mean_excess(self.log_odds)
        with np.errstate(over="ignore"):
            return np.maximum((1.0 + excess) * (np.exp(self.log_odds) - excess), 0.0)

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass; minus infinity at 0."""
        return log_series_log_mass(weights, self.log_odds)

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`: one minus an incomplete beta integral over log(1 + z)."""
        floor = np.floor(np.asarray(weights, dtype=np.float64))
        floor, index = np.broadcast_arrays(floor, self.log_odds)
        inside = (floor >= 1.0) & (floor < np.inf) & (index > -np.inf)
        above = np.zeros(floor.shape)
        above[inside] = _log_series_upper(floor[inside], index[inside])
        return np.where(floor >= 1.0, 1.0 - above, 0.0)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest count whose cdf reaches the level; infinite at level 1 unless z is 0."""
        levels = checked_levels(level, len(self.log_odds))
        top = np.where(self.log_odds > -np.inf, np.inf, 1.0)

        def cdf(weights: Floats, which: Integers) -> Floats:
            return LogarithmicSeriesLinkLaw(self.log_odds[which]).cdf(weights)

        return smallest_weight(cdf, levels, np.ones_like(levels), top, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) counts: geometric around odds that are log-uniform below 1 + z."""
        uniform = rng.random((size, len(self.log_odds)))
        waited = np.expm1(uniform * np.logaddexp(0.0, self.log_odds))
        z = np.exp(self.log_odds)
        later = rng.standard_exponential(uniform.shape) * np.maximum(z - waited, 0.0) / (1.0 + waited)
        return 1.0 + draw_poisson(rng, later)
