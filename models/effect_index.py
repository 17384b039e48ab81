"""From a fit with node effects to what a model reports and predicts with."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from math import inf, log

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence
from steelyard.models.effect_errors import MOST_EFFECTS
from steelyard.models.effect_fit import EffectFit
from steelyard.models.effect_separation import Direction, Stage
from steelyard.models.estimates import Estimate, EstimatePart, Estimates, Status
from steelyard.models.maximum_entropy.support import Support
from steelyard.models.node_effects import NodeEffects

__all__ = ["EffectIndex", "effect_convergence", "effect_estimates"]


@dataclass(frozen=True, eq=False)
class EffectIndex:
    """First effect + second effect + covariates x slopes on any dyads.

    Minus infinity where the limit of the fit has mean 0 (plus infinity where nothing holds the mean back). On
    dyads that the training dyads say nothing about, as those of a node without any, it is the log of the
    average training flow.
    """

    kind: NodeEffects
    covariates: tuple[str, ...]
    slopes: Floats
    first: Floats
    second: Floats
    stages: tuple[Stage, ...]
    undetermined: float

    @classmethod
    def of(cls, fit: EffectFit, covariates: Sequence[str]) -> EffectIndex:
        average = log(fit.average) if fit.average > 0 else -inf
        return cls(fit.kind, tuple(covariates), fit.slopes, fit.first, fit.second, fit.stages, average)

    def on(self, dyads: Dyads) -> Floats:
        """(n,) values of the index."""
        columns = dyads.design(self.covariates)[:, 1:]
        ends = self.kind.ends(dyads.origin, dyads.destination, dyads.n_nodes)
        index = np.full(len(columns), self.undetermined)
        open_ = np.ones(len(index), dtype=bool)
        for stage in self.stages:
            if isinstance(stage, Support):
                index[open_ & stage.surely_empty(ends.first, ends.second)] = -inf
                index[open_ & stage.surely_linked(ends.first, ends.second)] = inf
                open_ &= stage.free(ends.first, ends.second)
            else:
                move = stage.moves(columns, ends)
                hit = open_ & (move != 0.0)
                index[hit] = np.sign(move[hit]) * inf
                open_ &= ~hit
        some = ends.restricted(open_)
        index[open_] = columns[open_] @ self.slopes + self.first[some.first] + self.second[some.second]
        return index


def effect_estimates(
    fit: EffectFit, covariates: Sequence[str], labels: Sequence[str], part: EstimatePart
) -> Estimates:
    """Rows for the slopes, then one for every node and role; there is no constant beside the effects."""
    slopes = [_slope(fit, position, name, part) for position, name in enumerate(covariates)]
    return Estimates((*slopes, *_effects(fit, labels, part)))


def _slope(fit: EffectFit, position: int, name: str, part: EstimatePart) -> Estimate:
    along = next((d.slopes[position] for d in _directions(fit) if d.slopes[position] != 0.0), 0.0)
    if along:
        note = "no finite estimate: the data are separated along it"
        return Estimate(part, name, inf if along > 0 else -inf, {}, Status.BOUNDARY, note=note)
    if position in fit.contained:
        note = "set aside: the effects already contain it"
        return Estimate(part, name, 0.0, {}, Status.FIXED, note=note)
    if position in fit.aliased:
        note = "set aside: the terms before it already contain it"
        return Estimate(part, name, 0.0, {}, Status.FIXED, note=note)
    # A variance of zero may round to just below it.
    errors = {k: float(np.sqrt(np.maximum(m[position, position], 0.0))) for k, m in fit.covariances.items()}
    return Estimate(part, name, float(fit.slopes[position]), errors, repaired=fit.repaired)


def _effects(fit: EffectFit, labels: Sequence[str], part: EstimatePart) -> Iterator[Estimate]:
    note = _gauge_note(fit)
    for suffix, side in fit.kind.roles:
        values = (fit.first, fit.second)[side]
        for node, label in enumerate(labels):
            term, value = f"node:{label}{suffix}", float(values[node])
            if np.isfinite(value):
                errors = {kind: float(sides[side][node]) for kind, sides in fit.errors.items()}
                yield Estimate(part, term, value, errors, note=note)
            else:
                why = "no training dyads" if np.isnan(value) else "no flow on its training dyads: mean 0"
                yield Estimate(part, term, value, {}, Status.BOUNDARY, note=why)


def _gauge_note(fit: EffectFit) -> str:
    said = {
        NodeEffects.ORIGIN_AND_DESTINATION: "gauge: origins' and destinations' effects have equal sums",
        NodeEffects.NODE: "",
    }.get(fit.kind, "the effects hold the constant")
    if not fit.errors and fit.convergence.converged:
        large = f"no standard errors beyond {MOST_EFFECTS} effects"
        said = f"{said}; {large}" if said else large
    return said


def effect_convergence(fit: EffectFit, covariates: Sequence[str], labels: Sequence[str]) -> Convergence:
    """The certificate, with what was fixed counted, and the nodes and terms behind it named."""
    said = [fit.convergence.message] if fit.convergence.message else []
    edge = [
        f"{label}{suffix.replace(':', ' as ')}"
        for suffix, side in fit.kind.roles
        for label, value in zip(labels, (fit.first, fit.second)[side].tolist(), strict=True)
        if not np.isfinite(value)
    ]
    if edge:
        named = ", ".join(edge[:5]) + (" ..." if len(edge) > 5 else "")
        said.append(f"{len(edge)} node effect{'s' * (len(edge) > 1)} at the boundary: {named}")
    if fit.separated.any():
        terms = [
            name for k, name in enumerate(covariates) if any(d.slopes[k] != 0.0 for d in _directions(fit))
        ]
        along = f" (separated along {', '.join(terms)} and effects)" if terms else ""
        said.append(f"{int(fit.separated.sum())} separated dyads fixed at mean 0{along}")
    return replace(fit.convergence, message="; ".join(said))


def _directions(fit: EffectFit) -> list[Direction]:
    return [stage for stage in fit.stages if isinstance(stage, Direction)]
