"""Counts of a link: a Poisson or negative binomial law given that the count is not zero."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.count_laws import DispersionForm, NegativeBinomialLaw
from steelyard.models.flow_distribution import checked_levels
from steelyard.models.measure import Measure
from steelyard.models.quantiles import of_some, smallest_weight
from steelyard.models.special import negative_binomial_log_zero
from steelyard.models.tails import negative_binomial_survival, poisson_survival

__all__ = ["ZeroTruncatedLaw"]

_POISSON_FROM = 1e12  # sizes this many times the mean: the negative binomial is Poisson to all digits here


@dataclass(frozen=True, eq=False)
class ZeroTruncatedLaw:
    """A count law given that the count is at least 1; where the mean is 0, all mass is on 1, the limit.

    Parameters
    ----------
    counts : the law before truncation, its dispersion 0 for Poisson counts

    Raises
    ------
    ModelError
        if a mean or a dispersion of `counts` is negative or not finite.
    """

    counts: NegativeBinomialLaw

    @classmethod
    def of(
        cls, mean: Floats, dispersion: float, form: DispersionForm = DispersionForm.QUADRATIC
    ) -> ZeroTruncatedLaw:
        """Law with (n,) means before truncation; a dispersion of 0 gives Poisson counts."""
        return cls(NegativeBinomialLaw(mean, dispersion, form))

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) ones: the law is about links."""
        return np.ones_like(self.counts.mean)

    @property
    def _certain(self) -> Bools:
        """Where nothing but a count of 1 can be."""
        return np.asarray(self.counts.mean <= 0.0)

    @property
    def _log_zero(self) -> Floats:
        return negative_binomial_log_zero(self.counts.mean, self.counts.size)

    @property
    def _seen(self) -> Floats:
        """(n,) probability of a count above zero, 1 in place of 0."""
        return np.where(self._certain, 1.0, -np.expm1(self._log_zero))

    @property
    def mean(self) -> Floats:
        """(n,) mean before truncation over the probability of a count above zero; 1 in the limit."""
        return np.where(self._certain, 1.0, np.maximum(self.counts.mean / self._seen, 1.0))

    @property
    def variance(self) -> Floats:
        """(n,) E[w^2] - mean^2; infinite where that overflows, 0 in the limit."""
        # E[w (w - 1)] given a link is m (growth m) / P(w > 0); the rest is a difference without large terms.
        m, mean = self.counts.mean, self.mean
        with np.errstate(over="ignore", invalid="ignore"):
            pairs = mean * (m + self.counts.variance / np.where(self._certain, 1.0, m) - 1.0)
            spread = pairs - mean * (mean - 1.0)
        return np.where(self._certain, 0.0, np.where(np.isnan(spread), np.inf, np.maximum(spread, 0.0)))

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass; minus infinity at 0."""
        weights = np.asarray(weights, dtype=np.float64)
        with np.errstate(invalid="ignore"):
            inside = self.counts.log_density(weights) - np.log(self._seen)
        limit = np.where(weights == 1.0, 0.0, -np.inf)
        return np.where(self._certain, limit, np.where(weights >= 1.0, np.minimum(inside, 0.0), -np.inf))

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        floor = np.floor(np.asarray(weights, dtype=np.float64))
        inside = (floor >= 1.0) & np.isfinite(floor)
        w = np.where(inside, floor, 1.0)
        zero = np.exp(self._log_zero)
        with np.errstate(invalid="ignore"):
            near = (self.counts.cdf(w) - zero) / self._seen
            # Where most of the mass is on zero, only the upper tail has digits left after it is taken out.
            far = 1.0 - self._survival(w) / self._seen
        known = np.clip(np.where(zero > 0.5, far, near), 0.0, 1.0)
        known = np.where(self._certain, 1.0, known)
        return np.where(inside, known, np.where(floor >= 1.0, 1.0, 0.0))

    def _survival(self, weights: Floats) -> Floats:
        """Probability of more than `weights` before truncation, where the mean is small; else anything."""
        weights, mean, size = np.broadcast_arrays(weights, self.counts.mean, self.counts.size)
        tail = np.zeros(weights.shape)
        poisson = size >= _POISSON_FROM * np.maximum(mean, 1.0)
        tail[poisson] = poisson_survival(weights[poisson], np.minimum(mean[poisson], 1.0))
        mixed = ~poisson & (mean > 0.0)
        tail[mixed] = negative_binomial_survival(weights[mixed], mean[mixed], size[mixed])
        return tail

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest weight whose cdf reaches the level; infinite at level 1 unless the mean is 0; 0 at level 0."""
        levels = checked_levels(level, len(self.counts.mean))
        zero = np.exp(self._log_zero)
        guess = np.maximum(self.counts.quantile(np.minimum(zero + levels * self._seen, 1.0 - 1e-16)), 1.0)
        top = np.where(self._certain, 1.0, np.inf)
        return smallest_weight(of_some(self.cdf, len(levels)), levels, guess, top, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) weights, exact at any mean.

        A count is the number of points of a process on [0, 1]. Given that there is one, the first point lies at a
        truncated exponential time; what it brings is 1 (Poisson) or logarithmic-series distributed (negative
        binomial), and what follows in the time that is left is an untruncated count.
        """
        shape = (size, len(self.counts.mean))
        uniform = rng.random(shape)
        # time = -log(1 - u P(w > 0)) / rate, the rate being -log P(0)
        rate = np.where(self._certain, 1.0, -self._log_zero)
        left = 1.0 + np.log1p(-uniform * self._seen) / rate
        left = np.where(self._certain, 0.0, np.clip(left, 0.0, 1.0))
        first = self._first_points(rng, shape)
        mean = (left * self.counts.mean).ravel()
        with np.errstate(invalid="ignore"):
            sizes = (left * np.where(np.isfinite(self.counts.size), self.counts.size, np.inf)).ravel()
        sizes = np.where(np.isnan(sizes), np.inf, sizes)
        some = (mean > 0.0) & (sizes > 0.0)
        dispersion = np.zeros_like(mean)
        dispersion[some] = 1.0 / sizes[some]
        usable = some & np.isfinite(dispersion)
        rest = NegativeBinomialLaw(np.where(usable, mean, 0.0), dispersion * usable, DispersionForm.QUADRATIC)
        return np.asarray(first + rest.draw(rng, 1).reshape(shape))

    def _first_points(self, rng: np.random.Generator, shape: tuple[int, ...]) -> Floats:
        """(size, n) counts that the first point brings."""
        share = np.where(
            np.isfinite(self.counts.size), self.counts.mean / (self.counts.mean + self.counts.size), 0.0
        )
        share = np.clip(np.where(self._certain, 0.0, share), 0.0, 1.0 - 1e-16)
        return np.maximum(rng.logseries(np.broadcast_to(share, shape)).astype(np.float64), 1.0)
