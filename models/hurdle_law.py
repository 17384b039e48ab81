"""A link or none, and then a weight given the link."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.errors import ModelError
from steelyard.models.flow_distribution import FlowDistribution, as_amounts, checked_levels
from steelyard.models.link_law import LinkLaw
from steelyard.models.measure import Measure
from steelyard.models.quantiles import of_some, smallest_weight

__all__ = ["HurdleLaw"]

_BELOW_ONE = 1.0 - 2.0**-53


@dataclass(frozen=True, eq=False)
class HurdleLaw:
    """No link with probability 1 - p; else a weight from a law that excludes zero.

    Where p is exactly 0 nothing of `given_link` enters, whatever it says there.

    Parameters
    ----------
    links : law of links over n dyads
    given_link : law of a link's weight over the same dyads, with link probability 1

    Raises
    ------
    ModelError
        if the two differ in their number of dyads, or `given_link` can be zero on a possible link.
    """

    links: LinkLaw
    given_link: FlowDistribution

    def __post_init__(self) -> None:
        of_links, given = self.links.log_odds, self.given_link.link_probability
        if of_links.shape != given.shape:
            raise ModelError(
                f"The two parts of a hurdle law must cover the same dyads: got {of_links.shape[0]} for links "
                f"and {given.shape[0]} for weights given a link."
            )
        leaks = (given != 1.0) & (of_links > -np.inf)
        if leaks.any():
            raise ModelError(
                f"The weights law of a hurdle must exclude zero; got {type(self.given_link).__name__} with a "
                f"link probability other than 1 on {leaks.sum()} of {leaks.size} dyads: truncate it at zero."
            )

    @property
    def measure(self) -> Measure:
        """That of the law given a link."""
        return self.given_link.measure

    @property
    def link_probability(self) -> Floats:
        """(n,) p."""
        return self.links.link_probability

    @property
    def mean(self) -> Floats:
        """(n,) p times the mean given a link."""
        p = self.link_probability
        return p * np.where(p > 0.0, self.given_link.mean, 0.0)

    @property
    def variance(self) -> Floats:
        """(n,) p V + p (1 - p) m^2 with m and V the mean and the variance given a link."""
        p, p_and_not = self.link_probability, self.links.variance
        within = p * np.where(p > 0.0, self.given_link.variance, 0.0)
        with np.errstate(over="ignore"):
            return within + p_and_not * np.square(np.where(p_and_not > 0.0, self.given_link.mean, 0.0))

    def _given(self, log_probability: Floats) -> Floats:
        """Log p plus the given log probability, which does not count where p = 0."""
        log_p = self.links.log_link_probability
        return log_p + np.where(log_p > -np.inf, log_probability, 0.0)

    def log_density(self, weights: Floats, /) -> Floats:
        """Log(1 - p) at 0; log p plus the log density given a link above."""
        given = self._given(self.given_link.log_density(weights))
        return np.where(
            weights == 0.0, self.links.log_no_link_probability, np.where(weights > 0.0, given, -np.inf)
        )

    def log_interval(self, lower: Floats, upper: Floats, /) -> Floats:
        """Log of P(lower < w <= upper) for 0 <= lower < upper, where the law given a link is one of amounts.

        Raises
        ------
        ModelError
            if it is not.
        """
        return self._given(as_amounts(self.given_link).log_interval(lower, upper))

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        p = self.link_probability
        given = np.where(p > 0.0, self.given_link.cdf(weights), 0.0)
        at_most = np.minimum(self.links.no_link_probability + p * given, 1.0)
        at_most = np.where(given == 1.0, 1.0, at_most)  # 1 - p and p may add up to less by rounding
        return np.where(np.asarray(weights) >= 0.0, at_most, 0.0)

    def quantile(self, level: float | Floats, /) -> Floats:
        """0 up to level 1 - p, then the matching quantile given a link."""
        p, none = self.link_probability, self.links.no_link_probability
        levels = checked_levels(level, len(p))
        over = (levels > none) & (p > 0.0)
        inner = np.clip((levels - none) / np.where(p > 0.0, p, 1.0), 0.0, _BELOW_ONE)
        guess = np.where(over, self.given_link.quantile(inner), 0.0)
        top = np.where(p > 0.0, self.given_link.quantile(1.0), 0.0)
        whole = self.measure is not Measure.AMOUNTS
        return smallest_weight(of_some(self.cdf, len(p)), levels, guess, top, whole=whole)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) weights, zeros included."""
        linked = self.links.draw(rng, size) > 0.0
        return np.where(linked, self.given_link.draw(rng, size), 0.0)
