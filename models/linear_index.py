"""From a fitted index likelihood to what a model reports and predicts with."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from math import exp, inf, log

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.contract import Convergence
from steelyard.models.covariance import NodePairs
from steelyard.models.estimates import ErrorKind, Estimate, EstimatePart, Estimates, Status
from steelyard.models.index_likelihood import IndexFit
from steelyard.models.separation import MOVES

__all__ = [
    "CONSTANT",
    "LinearIndex",
    "alpha_estimate",
    "index_estimates",
    "node_pairs",
    "per_unit",
    "scale_estimate",
    "with_alpha_at_its_edge",
]

CONSTANT = "constant"


def node_pairs(dyads: Dyads) -> NodePairs:
    """The ends of dyads, for node-clustered covariance."""
    return NodePairs(dyads.origin, dyads.destination, dyads.n_nodes)


@dataclass(frozen=True)
class LinearIndex:
    """constant + covariates x slopes on any dyads; infinite where a separated direction decides.

    Attributes
    ----------
    covariates : names, in the order of `coefficients` after the constant
    coefficients : (1 + k,) finite parts
    directions : (1 + k,) each; the first that moves a dyad sends its index to + or - infinity
    """

    covariates: tuple[str, ...]
    coefficients: tuple[float, ...]
    directions: tuple[tuple[float, ...], ...] = ()

    @classmethod
    def of(cls, fit: IndexFit, covariates: Sequence[str]) -> LinearIndex:
        """The first index of a fit."""
        return cls.from_coefficients(fit.coefficients[0], covariates, fit.directions)

    @classmethod
    def from_coefficients(
        cls, coefficients: Floats, covariates: Sequence[str], directions: Sequence[Floats] = ()
    ) -> LinearIndex:
        """An index from its (1 + k,) finite coefficients and the directions of its infinite parts."""
        infinite = tuple(tuple(d.tolist()) for d in directions)
        return cls(tuple(covariates), tuple(coefficients.tolist()), infinite)

    def on(self, dyads: Dyads) -> Floats:
        """(n,) values of the index."""
        design = dyads.design(self.covariates)
        index = np.asarray(design @ np.array(self.coefficients))
        decided = np.zeros(len(index), dtype=bool)
        for direction in self.directions:
            along = np.array(direction)
            move = design @ along
            # The limit that the fit itself used, and the rounding of columns that lie far from zero.
            tolerance = MOVES + 1e-14 * (np.abs(design) @ np.abs(along))
            hit = ~decided & (np.abs(move) > tolerance)
            index[hit] = np.sign(move[hit]) * inf
            decided |= hit
        return index


def per_unit(fit: IndexFit, unit: float) -> IndexFit:
    """The fit of a one-index log-linear mean to flows, from that of flows / unit.

    The constant gains log(unit), and the model covariance, whose variance is the mean, shrinks by the unit.
    """
    coefficients = fit.coefficients[0].copy()
    coefficients[0] += log(unit)
    kinds = {k: m / unit if k is ErrorKind.MODEL else m for k, m in fit.covariances.items()}
    return replace(fit, coefficients=(coefficients,), covariances=kinds)


def index_estimates(
    fit: IndexFit,
    covariates: Sequence[str],
    part: EstimatePart,
    index: int = 0,
    directions: Sequence[Floats] | None = None,
) -> Estimates:
    """Rows for the constant and slopes of an index; `directions` of the first one come with the fit."""
    names = (CONSTANT, *covariates)
    before = sum(len(c) for c in fit.coefficients[:index])
    rows = []
    for position, name in enumerate(names):
        infinite = fit.directions if directions is None else directions
        along = next((d[position] for d in infinite if d[position] != 0.0), 0.0)
        if along:
            note = "no finite estimate: the data are separated along it"
            rows.append(Estimate(part, name, inf if along > 0 else -inf, {}, Status.BOUNDARY, note=note))
        elif fit.separated.all():
            note = "not estimated: every dyad is fixed at its limit, and none is left to say anything of it"
            rows.append(Estimate(part, name, 0.0, {}, Status.FIXED, note=note))
        elif position in fit.aliased[index]:
            note = "set aside: the terms before it already contain it"
            rows.append(Estimate(part, name, 0.0, {}, Status.FIXED, note=note))
        else:
            value = float(fit.coefficients[index][position])
            errors = _errors(fit, before + position, 1.0)
            rows.append(Estimate(part, name, value, errors, repaired=fit.repaired))
    return Estimates(tuple(rows))


def scale_estimate(fit: IndexFit, index: int, name: str, part: EstimatePart) -> Estimate:
    """The row of a scale exp(constant) that is an index of its own; standard errors by the delta method."""
    position = sum(len(c) for c in fit.coefficients[:index])
    value = exp(float(fit.coefficients[index][0]))
    return Estimate(part, name, value, _errors(fit, position, value), positive=True, repaired=fit.repaired)


def alpha_estimate(fit: IndexFit, limit: str) -> Estimate:
    """The row of a dispersion that may be at its edge 0, where the fit comes back with one index.

    `limit` says which law is then the maximum.
    """
    if len(fit.coefficients) > 1:
        return scale_estimate(fit, 1, "alpha", EstimatePart.DISPERSION)
    note = f"no overdispersion: {limit}"
    return Estimate(EstimatePart.DISPERSION, "alpha", 0.0, {}, Status.BOUNDARY, True, note)


def with_alpha_at_its_edge(fit: IndexFit) -> Convergence:
    """The certificate, which says so where the dispersion is at its edge 0."""
    if len(fit.coefficients) > 1:
        return fit.convergence
    said = "; ".join(m for m in (fit.convergence.message, "alpha at its edge 0") if m)
    return replace(fit.convergence, message=said)


def _errors(fit: IndexFit, position: int, factor: float) -> Mapping[ErrorKind, float]:
    # A variance of zero may round to just below it.
    return {
        kind: factor * float(np.sqrt(np.maximum(matrix[position, position], 0.0)))
        for kind, matrix in fit.covariances.items()
    }
