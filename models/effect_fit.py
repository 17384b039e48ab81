"""Poisson likelihood (or pseudo-likelihood) with node effects and covariates, on plain arrays.

Newton's method on all effects and slopes at once. The information is dense only over nodes (P x P), never over
dyads: a network of a thousand nodes has a million dyads and two thousand effects.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.models.contract import Convergence
from steelyard.models.covariance import NodePairs, covariances
from steelyard.models.effect_design import EffectDesign
from steelyard.models.effect_errors import effect_errors
from steelyard.models.effect_separation import EffectSeparation, Stage, effect_separation
from steelyard.models.errors import ModelError
from steelyard.models.estimates import ErrorKind
from steelyard.models.likelihoods import Poisson
from steelyard.models.node_effects import EffectEnds, NodeEffects
from steelyard.models.solvers import Maximum, Slope, newton_maximise

__all__ = ["EffectFit", "fit_effects"]


@dataclass(frozen=True, eq=False)
class EffectFit:
    """A fitted mean exp(first effect + second effect + covariates x slopes).

    Attributes
    ----------
    kind : which effects
    slopes : (k,) on the original columns; 0 for columns set aside
    covariances : (k, k) of the slopes by kind; nan rows for columns set aside
    repaired : kinds of covariance that had to be made positive semidefinite
    aliased : positions of columns set aside
    contained : those of them that the effects contain
    first, second : (N,) effects; -inf for a node without flow, nan without any dyad; 0 in a role without effects
    errors : standard errors of the effects by kind, for each side (N,); empty where they are not worked out
    stages : what decides the dyads that have no finite index
    separated : (n,) dyads fixed at mean 0
    average : mean flow of all dyads
    rank : identified effects and slopes
    convergence : the certificate
    """

    kind: NodeEffects
    slopes: Floats
    covariances: Mapping[ErrorKind, Floats]
    repaired: frozenset[ErrorKind]
    aliased: tuple[int, ...]
    contained: tuple[int, ...]
    first: Floats
    second: Floats
    errors: Mapping[ErrorKind, tuple[Floats, Floats]]
    stages: tuple[Stage, ...]
    separated: Bools
    average: float
    rank: int
    convergence: Convergence


def fit_effects(
    response: Floats, columns: Floats, ends: EffectEnds, pairs: NodePairs | None = None, unit: float = 1.0
) -> EffectFit:
    """Maximise the Poisson likelihood of flows with node effects.

    Parameters
    ----------
    response : (n,) flows >= 0
    columns : (n, k) covariates; a constant is among the effects
    ends : whose effects enter each dyad
    pairs : nodes of each dyad, for node-clustered covariance
    unit : flows are divided by it inside, which changes no result but rounding and the stopping rule

    Returns
    -------
    EffectFit. Effects of first and second ends have equal sums within each component of the dyads left.

    Raises
    ------
    ModelError : fewer dyads than effects and slopes, or effects that hang together by almost nothing
    """
    found = effect_separation(response > 0, columns, ends)
    design = found.design
    if design is None:
        return _all_separated(response, columns, ends, found)
    n = int(found.keep.sum())
    if n <= design.rank:
        raise ModelError(
            f"{n} dyads that are not separated cannot identify {design.rank} effects and slopes; use fewer "
            "covariates or effects, or more dyads"
        )
    objective = _Objective(Poisson(response[found.keep] / unit), design)
    maximum = newton_maximise(objective, objective.start())
    return _assembled(response, ends, found, objective, maximum, pairs, unit)


@dataclass(frozen=True, eq=False)
class _Objective:
    """The log-likelihood of effects, then slopes; a unit of curvature along the gauge moves no maximum."""

    likelihood: Poisson
    design: EffectDesign
    strengths: Floats = field(init=False)
    anchors: Floats = field(init=False)

    def __post_init__(self) -> None:
        strengths = self.design.incidence.sums(self.likelihood.response)
        object.__setattr__(self, "strengths", strengths)
        object.__setattr__(self, "anchors", self.design.incidence.anchors(strengths))

    def index(self, point: Floats) -> Floats:
        size = self.design.incidence.size
        return self.design.incidence.spread(point[:size]) + self.design.matrix @ point[size:]

    def start(self) -> Floats:
        """Effects from each node's own average flow, slopes 0."""
        incidence = self.design.incidence
        average = float(self.likelihood.response.mean())
        own = np.log(self.strengths / incidence.sums(np.ones(len(self.likelihood.response))))
        effects = own - (len(incidence.positions) - 1) / len(incidence.positions) * np.log(average)
        lengths = (self.anchors * incidence.gauge).sum(axis=0)
        effects -= incidence.gauge @ ((self.anchors.T @ effects) / lengths)
        return np.concatenate([effects, np.zeros(self.design.matrix.shape[1])])

    def value(self, point: Floats) -> float:
        drift = self.anchors.T @ point[: self.design.incidence.size]
        with np.errstate(over="ignore", invalid="ignore"):
            return self.likelihood.value([self.index(point)]) - 0.5 * float(drift @ drift)

    def movement(self, step: Floats) -> float:
        return float(np.abs(self.index(step)).max(initial=0.0))

    def slope(self, point: Floats) -> Slope:
        incidence, matrix, size = self.design.incidence, self.design.matrix, self.design.incidence.size
        found = self.likelihood.derivatives([self.index(point)])
        first = found.first[0]
        drift = self.anchors @ (self.anchors.T @ point[:size])
        gradient = np.concatenate([incidence.sums(first) - drift, matrix.T @ first])
        scale = np.concatenate([self.strengths, np.abs(matrix).T @ np.abs(first)])
        information = self.blocks(-found.second[0, 0])
        information[:size, :size] += self.anchors @ self.anchors.T
        return Slope(gradient, information, scale)

    def blocks(self, weights: Floats) -> Floats:
        """(P + r, P + r) sum over dyads of weight x outer product of the dyad's row of effects and columns."""
        incidence, matrix, size = self.design.incidence, self.design.matrix, self.design.incidence.size
        weighted = matrix * weights[:, None]
        found = np.empty((size + matrix.shape[1],) * 2)
        found[:size, :size] = incidence.blocks(weights)
        found[:size, size:] = incidence.column_sums(weighted)
        found[size:, :size] = found[:size, size:].T
        found[size:, size:] = matrix.T @ weighted
        return found


def _assembled(
    response: Floats,
    ends: EffectEnds,
    found: EffectSeparation,
    objective: _Objective,
    maximum: Maximum,
    pairs: NodePairs | None,
    unit: float,
) -> EffectFit:
    """Back to the original columns, unit and gauge."""
    design, incidence = objective.design, objective.design.incidence
    slopes = design.back @ maximum.point[incidence.size :]
    effects = design.original_effects(maximum.point[: incidence.size], slopes)
    effects = incidence.in_gauge(effects + np.log(unit) / len(incidence.positions))
    kinds: Mapping[ErrorKind, Floats] = {}
    repaired: frozenset[ErrorKind] = frozenset()
    errors: dict[ErrorKind, tuple[Floats, Floats]] = {}
    if maximum.convergence.converged:
        kinds, repaired = _slope_covariances(objective, maximum.point, pairs, found.keep, unit)
        residuals = objective.likelihood.derivatives([objective.index(maximum.point)]).first[0]
        factor = len(residuals) / (len(residuals) - design.rank)
        own = effect_errors(design, maximum.information, lambda: factor * objective.blocks(residuals**2))
        shrunk = {k: v / np.sqrt(unit) if k is ErrorKind.MODEL else v for k, v in own.items()}
        errors = {kind: _on_sides(values, ends, incidence.nodes, np.nan) for kind, values in shrunk.items()}
    first, second = _on_sides(effects, ends, incidence.nodes, -np.inf)
    return EffectFit(
        kind=ends.kind,
        slopes=slopes,
        covariances=kinds,
        repaired=repaired,
        aliased=design.aliased,
        contained=design.contained,
        first=first,
        second=second,
        errors=errors,
        stages=found.stages,
        separated=~found.keep,
        average=float(response.mean()),
        rank=design.rank,
        convergence=maximum.convergence,
    )


def _slope_covariances(
    objective: _Objective, point: Floats, pairs: NodePairs | None, keep: Bools, unit: float
) -> tuple[Mapping[ErrorKind, Floats], frozenset[ErrorKind]]:
    """The slopes' block of the covariance of all effects and slopes.

    With the columns' weighted projection on the effects taken out, information and scores of the slopes alone
    give that very block (partialling out).
    """
    design = objective.design
    if not design.matrix.shape[1]:
        return {}, frozenset()
    found = objective.likelihood.derivatives([objective.index(point)])
    weights = -found.second[0, 0]
    left, _ = design.incidence.without_effects(design.matrix, weights)
    some = None if pairs is None else NodePairs(pairs.origin[keep], pairs.destination[keep], pairs.n_nodes)
    got = covariances(
        left.T @ (left * weights[:, None]), left * found.first[0][:, None], some, n_parameters=design.rank
    )
    by_kind: dict[ErrorKind, Floats] = {}
    for kind, matrix in got.by_kind.items():
        full = design.back @ (matrix / unit if kind is ErrorKind.MODEL else matrix) @ design.back.T
        full[list(design.aliased), :] = np.nan
        full[:, list(design.aliased)] = np.nan
        by_kind[kind] = full
    return by_kind, got.repaired


def _on_sides(
    values: Floats, ends: EffectEnds, nodes: tuple[tuple[int, Integers], ...], edge: float
) -> tuple[Floats, Floats]:
    """(N,) for each side: the values of the nodes that have one, `edge` for others with dyads, nan without."""
    sides = [np.zeros(ends.n_nodes), np.zeros(ends.n_nodes)]
    offset = 0
    for side, members in nodes:
        sides[side] = np.where(ends.seen(side), edge, np.nan)
        sides[side][members] = values[offset : offset + len(members)]
        offset += len(members)
    return sides[0], sides[0] if ends.kind is NodeEffects.NODE else sides[1]


def _all_separated(response: Floats, columns: Floats, ends: EffectEnds, found: EffectSeparation) -> EffectFit:
    """Every flow is zero: nothing is left to be fitted."""
    k = columns.shape[1]
    nobody: Integers = np.zeros(0, dtype=np.int64)
    nodes = tuple((side, nobody) for _, side in ends.kind.roles)
    first, second = _on_sides(np.zeros(0), ends, nodes, -np.inf)
    return EffectFit(
        kind=ends.kind,
        slopes=np.zeros(k),
        covariances={},
        repaired=frozenset(),
        aliased=tuple(range(k)),
        contained=tuple(range(k)),
        first=first,
        second=second,
        errors={},
        stages=found.stages,
        separated=np.ones(len(response), dtype=bool),
        average=float(response.mean()),
        rank=0,
        convergence=Convergence(True, 0, 0.0),
    )
