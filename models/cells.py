"""The counts version of a law of amounts: what it says about flows rounded to whole units."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.flow_distribution import FlowDistribution, as_amounts, checked_levels
from steelyard.models.measure import Measure
from steelyard.models.quantiles import of_some, smallest_weight
from steelyard.models.special import whole_and_possible

__all__ = ["CellLaw"]

_NO_HALVES = (
    2.0**51
)  # from here on c - 1/2 and c + 1/2 lose their halves, and a density is its cell's probability


def _counted(amounts: Floats) -> Floats:
    """Whole units under the study's rule: rounded, but a link keeps at least one."""
    return np.where(amounts > 0.0, np.maximum(np.rint(amounts), 1.0), 0.0)


@dataclass(frozen=True, eq=False)
class CellLaw:
    """Counts under the study's rounding rule, 0 for no link and max(1, round(w)) for a link of amount w.

    P(0) = 1 - p, P(1) = P(0 < w <= 3/2), and P(c) = P(c - 1/2 < w <= c + 1/2) from two on. So laws of amounts
    can stand beside laws of counts on one footing.

    Parameters
    ----------
    amounts : law of amounts, in units of one count

    Raises
    ------
    ModelError
        if `amounts` is not a law of amounts.

    Notes
    -----
    `mean` and `variance` are those of the amounts: rounding is a convention of the study, not of the model.
    Those of the counts differ by rounding: by half a unit at most, by less than 1 where a link is kept at 1.
    """

    amounts: FlowDistribution

    def __post_init__(self) -> None:
        as_amounts(self.amounts)

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) p."""
        return self.amounts.link_probability

    @property
    def mean(self) -> Floats:
        """(n,) mean of the amounts."""
        return self.amounts.mean

    @property
    def variance(self) -> Floats:
        """(n,) variance of the amounts."""
        return self.amounts.variance

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass of the cells."""
        c, penalty = whole_and_possible(weights)
        halved = np.clip(c, 1.0, _NO_HALVES)
        cell = as_amounts(self.amounts).log_interval(np.where(halved > 1.0, halved - 0.5, 0.0), halved + 0.5)
        plain = (c == 0.0) | (c > _NO_HALVES)
        if plain.any():
            cell = np.where(plain, self.amounts.log_density(c), cell)
        return cell + penalty

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        floor = np.floor(np.asarray(weights, dtype=np.float64))
        return self.amounts.cdf(np.where(floor >= 1.0, floor + 0.5, floor))

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest count whose cdf reaches the level."""
        levels = checked_levels(level, len(self.link_probability))
        guess = _counted(self.amounts.quantile(levels))
        return smallest_weight(of_some(self.cdf, len(levels)), levels, guess, guess, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) counts: draws of the amounts, rounded."""
        return _counted(self.amounts.draw(rng, size))
