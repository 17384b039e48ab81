"""The law of links: 0 or 1 for each dyad."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Floats
from steelyard.models.errors import ModelError
from steelyard.models.flow_distribution import checked_levels, checked_parameter
from steelyard.models.measure import Measure

__all__ = ["LinkLaw"]


@dataclass(frozen=True, eq=False, kw_only=True)
class LinkLaw:
    """Links there with probability p, held as log odds so that both log p and log(1 - p) keep their digits.

    Build it with `from_log_odds` where a model has log odds (or log p and log(1 - p): their difference), with
    `from_probability` otherwise.

    Parameters
    ----------
    log_odds : (n,) array of log(p / (1 - p)); plus or minus infinity for p of exactly 1 or 0

    Raises
    ------
    ModelError
        if a log odds is nan.
    """

    log_odds: Floats

    def __post_init__(self) -> None:
        log_odds = np.asarray(self.log_odds, dtype=np.float64)
        if log_odds.ndim != 1 or np.isnan(log_odds).any():
            raise ModelError(
                f"Log odds of links must be one number for each dyad; got shape {log_odds.shape} "
                f"with {np.isnan(log_odds).sum()} nan: look for covariates far outside the range of the fit."
            )
        object.__setattr__(self, "log_odds", log_odds)

    @classmethod
    def from_log_odds(cls, log_odds: Floats, /) -> LinkLaw:
        """Law with the given (n,) log odds, infinite ones allowed."""
        return cls(log_odds=log_odds)

    @classmethod
    def from_probability(cls, link_probability: Floats, /) -> LinkLaw:
        """Law with the given (n,) probabilities, 0 and 1 allowed.

        Raises
        ------
        ModelError
            if a probability is outside [0, 1] or nan.
        """
        p = checked_parameter("Link probability", link_probability, at_least=0.0, at_most=1.0)
        with np.errstate(divide="ignore"):
            return cls(log_odds=np.log(p) - np.log1p(-p))

    @property
    def measure(self) -> Measure:
        """Links."""
        return Measure.LINKS

    @property
    def link_probability(self) -> Floats:
        """(n,) probability of a link."""
        return np.asarray(special.expit(self.log_odds))

    @property
    def no_link_probability(self) -> Floats:
        """(n,) probability of no link, to full relative precision."""
        return np.asarray(special.expit(-self.log_odds))

    @property
    def log_link_probability(self) -> Floats:
        """(n,) log p."""
        return np.asarray(special.log_expit(self.log_odds))

    @property
    def log_no_link_probability(self) -> Floats:
        """(n,) log(1 - p)."""
        return np.asarray(special.log_expit(-self.log_odds))

    @property
    def mean(self) -> Floats:
        """(n,) p."""
        return self.link_probability

    @property
    def variance(self) -> Floats:
        """(n,) p (1 - p)."""
        return self.link_probability * self.no_link_probability

    def log_density(self, weights: Floats, /) -> Floats:
        """Log p at 1, log(1 - p) at 0, minus infinity elsewhere."""
        absent = np.where(weights == 0.0, self.log_no_link_probability, -np.inf)
        return np.where(weights == 1.0, self.log_link_probability, absent)

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        below_one = np.where(np.asarray(weights) >= 0.0, self.no_link_probability, 0.0)
        return np.where(np.asarray(weights) >= 1.0, 1.0, below_one)

    def quantile(self, level: float | Floats, /) -> Floats:
        """0 up to level 1 - p, then 1."""
        levels = checked_levels(level, len(self.log_odds))
        certain_zero = self.log_odds == -np.inf
        return np.where(certain_zero | (levels <= self.no_link_probability), 0.0, 1.0)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) zeros and ones."""
        uniform = rng.random((size, len(self.log_odds)))
        return (uniform < self.link_probability).astype(np.float64)
