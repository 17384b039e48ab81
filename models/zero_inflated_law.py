"""A count law with more zeros than it has of its own."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import expit

from steelyard.datasets.arrays import Floats
from steelyard.models.count_laws import NegativeBinomialLaw, PoissonLaw
from steelyard.models.errors import ModelError
from steelyard.models.flow_distribution import checked_levels
from steelyard.models.measure import Measure
from steelyard.models.quantiles import of_some, smallest_weight

__all__ = ["ZeroInflatedLaw"]


@dataclass(frozen=True, eq=False)
class ZeroInflatedLaw:
    """Zero with probability pi, else a count that may itself be zero.

    Parameters
    ----------
    log_odds : (n,) array of log(pi / (1 - pi)), infinite ones allowed
    counts : the count law of the same n dyads

    Raises
    ------
    ModelError
        if a log odds is nan, or the shapes disagree.
    """

    log_odds: Floats
    counts: PoissonLaw | NegativeBinomialLaw

    def __post_init__(self) -> None:
        log_odds = np.asarray(self.log_odds, dtype=np.float64)
        if log_odds.shape != self.counts.mean.shape or np.isnan(log_odds).any():
            raise ModelError(
                f"Log odds of inflation must be one number for each dyad; got shape {log_odds.shape} for "
                f"{len(self.counts.mean)} dyads with {np.isnan(log_odds).sum()} nan: look for covariates far "
                "outside the range of the fit."
            )
        object.__setattr__(self, "log_odds", log_odds)

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def _counted(self) -> Floats:
        """(n,) 1 - pi."""
        return np.asarray(expit(-self.log_odds))

    @property
    def link_probability(self) -> Floats:
        """(n,) probability of a count above zero."""
        return self._counted * self.counts.link_probability

    @property
    def mean(self) -> Floats:
        """(n,) (1 - pi) times the mean of the counts."""
        return self._counted * self.counts.mean

    @property
    def variance(self) -> Floats:
        """(n,) (1 - pi) (variance + pi mean^2); infinite where that overflows."""
        with np.errstate(over="ignore"):
            return np.asarray(
                self._counted * (self.counts.variance + expit(self.log_odds) * self.counts.mean**2)
            )

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass."""
        weights = np.asarray(weights, dtype=np.float64)
        with np.errstate(over="ignore"):
            counted = self.counts.log_density(weights) - np.logaddexp(0.0, self.log_odds)
            inflated = -np.logaddexp(0.0, -self.log_odds)
        return np.where(weights == 0.0, np.logaddexp(inflated, counted), counted)

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        weights = np.asarray(weights, dtype=np.float64)
        inside = expit(self.log_odds) + self._counted * self.counts.cdf(weights)
        return np.where(weights >= 0.0, np.minimum(inside, 1.0), 0.0)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest count whose cdf reaches the level; infinite at level 1 unless no count above zero can be."""
        levels = checked_levels(level, len(self.log_odds))
        counted = self._counted
        rest = 1.0 - (1.0 - levels) / np.maximum(counted, 1e-300)
        guess = self.counts.quantile(np.clip(rest, 0.0, 1.0 - 1e-16))
        top = np.where(self.link_probability > 0.0, np.inf, 0.0)
        return smallest_weight(of_some(self.cdf, len(levels)), levels, guess, top, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) counts."""
        inflated = rng.random((size, len(self.log_odds))) < expit(self.log_odds)
        return np.where(inflated, 0.0, self.counts.draw(rng, size))
