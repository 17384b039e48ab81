"""The fitted form that every link model with log odds linear in covariates shares."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence
from steelyard.models.distributions import LinkLaw
from steelyard.models.estimates import Estimates
from steelyard.models.linear_index import LinearIndex
from steelyard.models.measure import Measure

__all__ = ["FittedLinkIndex"]


@dataclass(frozen=True)
class FittedLinkIndex:
    """Log odds of a link equal to a linear index."""

    index: LinearIndex
    estimates: Estimates
    n_parameters: int
    convergence: Convergence
    measure: ClassVar[Measure] = Measure.LINKS

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return self.distribution(dyads).link_probability

    def distribution(self, dyads: Dyads, /) -> LinkLaw:
        return LinkLaw.from_log_odds(self.index.on(dyads))
