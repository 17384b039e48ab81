"""One probability for every dyad: the law that knows the number of links and nothing else."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.datasets import Dyads
from steelyard.models.contract import Family, Holdout, Information, Part, Requirements
from steelyard.models.estimates import EstimatePart
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Logit
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.link_index import FittedLinkIndex
from steelyard.models.measure import Measure

__all__ = ["DensityModel"]


@dataclass(frozen=True)
class DensityModel:
    """Every dyad is a link with the same probability; it has no options."""

    name: ClassVar[str] = "density"
    family: ClassVar[Family] = Family.MAXIMUM_ENTROPY
    part: ClassVar[Part] = Part.LINKS
    measure: ClassVar[Measure] = Measure.LINKS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.DENSITY
    requires: ClassVar[Requirements] = Requirements()
    summary: ClassVar[str] = (
        "Of all laws of links whose expected number is the observed one, the least committal: every dyad has "
        "the same probability, independently."
    )
    formula: ClassVar[str] = "p = links / dyads; the constant is log p / (1 - p)"
    parameters: ClassVar[str] = (
        "expected number of links = observed number (closed form); 1, or 0 when p is 0 or 1"
    )
    caution: ClassVar[str] = "A yardstick, not an explanation: all nodes have the same expected degree."
    sources: ClassVar[str] = "Erdos & Renyi (1959); Park & Newman (2004)"

    def fit(self, dyads: Dyads, /) -> FittedLinkIndex:
        """Match the number of links on these dyads."""
        found = fit_indices(Logit(dyads.links.astype(float)), [np.ones((len(dyads), 1))], node_pairs(dyads))
        return FittedLinkIndex(
            index=LinearIndex.of(found, ()),
            estimates=index_estimates(found, (), EstimatePart.LINKS),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
