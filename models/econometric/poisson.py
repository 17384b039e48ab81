"""Poisson regression of counts (or, as a pseudo-likelihood, of amounts) on all dyads, with or without node effects."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import ClassVar, Protocol

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence, Family, Holdout, Information, Need, Part, Requirements
from steelyard.models.declared import Declared
from steelyard.models.distributions import PoissonLaw
from steelyard.models.effect_fit import fit_effects
from steelyard.models.effect_index import EffectIndex, effect_convergence, effect_estimates
from steelyard.models.errors import ModelError
from steelyard.models.estimates import EstimatePart, Estimates, Status
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.linear_index import LinearIndex, index_estimates, node_pairs, per_unit
from steelyard.models.measure import Measure
from steelyard.models.node_effects import NodeEffects

__all__ = ["FittedPoisson", "FittedPoissonMean", "PoissonModel"]

USE_NODE_EFFECTS = (
    "use node_effects = true there, since the two ends of an undirected dyad are not told apart"
)
UNIT_NOTE = "pseudo-likelihood: the model error depends on the unit, the others do not"


class _Index(Protocol):
    """The log of the mean on any dyads."""

    def on(self, dyads: Dyads, /) -> Floats: ...


@dataclass(frozen=True)
class FittedPoissonMean:
    """Mean exp(index) on every dyad, and no more than that."""

    index: _Index
    estimates: Estimates
    n_parameters: int
    convergence: Convergence

    def expected_weight(self, dyads: Dyads, /) -> Floats:
        return np.exp(self.index.on(dyads))


@dataclass(frozen=True)
class FittedPoisson(FittedPoissonMean):
    """Poisson counts with mean exp(index) on every dyad."""

    measure: ClassVar[Measure] = Measure.COUNTS

    def distribution(self, dyads: Dyads, /) -> PoissonLaw:
        return PoissonLaw(self.expected_weight(dyads))


@dataclass(frozen=True)
class PoissonModel:
    """Flows with log-linear mean, zeros included.

    Parameters
    ----------
    covariates : names of the covariates that enter the log of the mean beside a constant or effects
    origin_effects, destination_effects : an effect for each node as origin, as destination (directed networks)
    node_effects : one effect for each node, entering at both ends, in place of those
    amounts : fit the amounts in place of the counts; what is fitted is then a mean only

    Raises
    ------
    ModelError : node_effects together with the other effects
    """

    covariates: tuple[str, ...]
    origin_effects: bool = False
    destination_effects: bool = False
    node_effects: bool = False
    amounts: bool = False

    name: ClassVar[str] = "poisson"
    family: ClassVar[Family] = Family.ECONOMETRIC
    part: ClassVar[Part] = Part.JOINT
    measure = Declared[Measure | None](Measure.COUNTS, lambda m: None if m.amounts else Measure.COUNTS)
    holdouts = Declared[frozenset[Holdout]](
        frozenset(Holdout),
        lambda m: frozenset(Holdout) - ({Holdout.NODES} if m.effects else set()),
    )
    directed = Declared[frozenset[bool]](
        frozenset({True, False}),
        lambda m: frozenset({True} if m.origin_effects or m.destination_effects else {True, False}),
    )
    information = Declared[Information](
        Information.COVARIATES,
        lambda m: Information.STRENGTHS if m.effects else Information.COVARIATES,
    )
    requires: ClassVar[Requirements] = Requirements(Need.REQUIRED, otherwise=USE_NODE_EFFECTS)
    summary: ClassVar[str] = (
        "Counts on every dyad, zeros included, are Poisson with a log-linear mean. The slopes are consistent "
        "whenever that mean is right, whatever the variance; the probabilities are not. With effects of origins "
        "and destinations (options origin_effects, destination_effects) the fitted out- and in-flows of every "
        "node are the observed ones; with one effect a node (node_effects) their sum is. With the option amounts "
        "it is a pseudo-likelihood of the amounts, which states a mean and no distribution."
    )
    formula: ClassVar[str] = (
        "P(w) = exp(-m) m^w / w!,  log m = constant + sum of slope x covariate;  with effects "
        "log m_ij = a_i + b_j + sum of slope x covariate (node_effects: a_i + a_j), no constant"
    )
    parameters: ClassVar[str] = (
        "maximum likelihood; covariates + 1. With effects their rank instead of 1: origins + destinations less "
        "one for each connected part, or the nodes, fewer at the boundary; a and b are given equal sums. "
        "Covariates that the effects contain are set aside. Effects have no node-clustered errors"
    )
    caution: ClassVar[str] = (
        "Flows vary far more than Poisson counts: read robust or node-clustered errors, and do not trust its "
        "probability of a zero. Its log-likelihood on other units is another number. On amounts the model errors "
        "depend on the unit and mean nothing. With effects it is told every strength: compare it within its "
        "information tier. A node without flow on its training dyads has mean 0 on its other dyads too, so a "
        "held-out flow there is an impossible observation; a dyad that the training dyads say nothing about "
        "is given their average flow."
    )
    sources: ClassVar[str] = (
        "Gourieroux, Monfort & Trognon (1984); Santos Silva & Tenreyro (2006); Correia, Guimaraes & Zylkin (2019) "
        "on separation with effects"
    )

    def __post_init__(self) -> None:
        if self.node_effects and (self.origin_effects or self.destination_effects):
            raise ModelError(
                "node_effects gives each node one effect at both ends; give either node_effects or "
                "origin_effects and destination_effects, not both"
            )

    @property
    def effects(self) -> NodeEffects | None:
        """Which effects the options ask for."""
        return NodeEffects.chosen(
            origin=self.origin_effects, destination=self.destination_effects, node=self.node_effects
        )

    def fit(self, dyads: Dyads, /) -> FittedPoissonMean:
        """Maximum likelihood on all of these dyads, zeros included.

        Raises
        ------
        ModelError : origin or destination effects on an undirected network, or too few dyads
        """
        if dyads.directed not in self.directed:
            raise ModelError(
                f"origin_effects and destination_effects need a directed network; {USE_NODE_EFFECTS}"
            )
        response = dyads.weights if self.amounts else dyads.counts
        # A pseudo-likelihood may meet any unit: flows near 1 keep the stopping rule the same in all of them.
        unit = float(response.mean()) if self.amounts and response.any() else 1.0
        fit = self._with_effects if self.effects else self._plain
        index, rows, n_parameters, convergence = fit(response, dyads, unit)
        if self.amounts:
            return FittedPoissonMean(index, _of_a_pseudo_likelihood(rows), n_parameters, convergence)
        return FittedPoisson(index, rows, n_parameters, convergence)

    def _plain(
        self, response: Floats, dyads: Dyads, unit: float
    ) -> tuple[_Index, Estimates, int, Convergence]:
        fit = fit_indices(Poisson(response / unit), [dyads.design(self.covariates)], node_pairs(dyads))
        fit = fit if unit == 1.0 else per_unit(fit, unit)
        rows = index_estimates(fit, self.covariates, EstimatePart.JOINT)
        return LinearIndex.of(fit, self.covariates), rows, fit.rank, fit.convergence

    def _with_effects(
        self, response: Floats, dyads: Dyads, unit: float
    ) -> tuple[_Index, Estimates, int, Convergence]:
        assert self.effects is not None  # the caller's branch
        ends = self.effects.ends(dyads.origin, dyads.destination, dyads.n_nodes)
        columns = dyads.design(self.covariates)[:, 1:]
        fit = fit_effects(response, columns, ends, node_pairs(dyads), unit)
        rows = effect_estimates(fit, self.covariates, dyads.labels, EstimatePart.JOINT)
        convergence = effect_convergence(fit, self.covariates, dyads.labels)
        return EffectIndex.of(fit, self.covariates), rows, fit.rank, convergence


def _of_a_pseudo_likelihood(rows: Estimates) -> Estimates:
    """The same rows, those with errors saying which of them to read."""
    return Estimates(
        tuple(
            replace(row, note=f"{row.note}; {UNIT_NOTE}" if row.note else UNIT_NOTE)
            if row.status is Status.FREE
            else row
            for row in rows
        )
    )
