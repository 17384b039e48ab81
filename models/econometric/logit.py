"""Logit regression of links on covariates."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from steelyard.datasets import Dyads
from steelyard.models.contract import Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.estimates import EstimatePart
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Logit
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs
from steelyard.models.link_index import FittedLinkIndex
from steelyard.models.measure import Measure

__all__ = ["LogitModel"]


@dataclass(frozen=True)
class LogitModel:
    """Links with log odds linear in covariates.

    Parameters
    ----------
    covariates : names of the covariates that enter the log odds beside a constant
    """

    covariates: tuple[str, ...]

    name: ClassVar[str] = "logit"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.LINKS
    measure: ClassVar[Measure] = Measure.LINKS
    holdouts: ClassVar[frozenset[Holdout]] = frozenset(Holdout)
    directed: ClassVar[frozenset[bool]] = frozenset({True, False})
    information: ClassVar[Information] = Information.COVARIATES
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED)
    summary: ClassVar[str] = "Links are independent given the covariates, with log odds linear in them."
    formula: ClassVar[str] = "log p / (1 - p) = constant + sum of slope x covariate"
    parameters: ClassVar[str] = "maximum likelihood; covariates + 1, fewer where the data are separated"
    caution: ClassVar[str] = (
        "It knows nothing of a node but its covariates, so degrees spread less than observed ones. Estimates "
        "that do not exist are reported as infinite, with the separated dyads counted."
    )
    sources: ClassVar[str] = "McCullagh & Nelder (1989); Correia, Guimaraes & Zylkin (2019) on separation"

    def fit(self, dyads: Dyads, /) -> FittedLinkIndex:
        """Maximum likelihood on all of these dyads."""
        links = dyads.links.astype(float)
        found = fit_indices(Logit(links), [dyads.design(self.covariates)], node_pairs(dyads))
        return FittedLinkIndex(
            index=LinearIndex.of(found, self.covariates),
            estimates=index_estimates(found, self.covariates, EstimatePart.LINKS),
            n_parameters=found.rank,
            convergence=found.convergence,
        )
