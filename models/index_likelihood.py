"""Likelihoods in which each observation depends on the coefficients through one or more linear indices.

This is the estimation core: plain arrays in, estimates out. Poisson has one index (log mean); the negative
binomial has two (log mean, and log dispersion with a constant for its only column); and so on.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import block_diag

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.contract import Convergence
from steelyard.models.covariance import Covariances, NodePairs, covariances
from steelyard.models.design import ScaledDesign, scaled_design
from steelyard.models.errors import ModelError
from steelyard.models.estimates import ErrorKind
from steelyard.models.index_objective import SAMPLE_FROM, IndexObjective, good_start
from steelyard.models.index_protocol import Edges, IndexDerivatives, IndexLikelihood
from steelyard.models.separation import MOVES, separating_direction
from steelyard.models.solvers import NEGLIGIBLE, Maximum, newton_maximise

__all__ = ["Edges", "IndexDerivatives", "IndexFit", "IndexLikelihood", "fit_indices"]

# With many observations a step of 1e-8 standard errors costs more than it is worth.
NEGLIGIBLE_ON_MANY = 1e-16


@dataclass(frozen=True, eq=False)
class IndexFit:
    """A fitted index likelihood.

    Attributes
    ----------
    coefficients : for each index, (k,) on the original columns; 0 for columns set aside
    covariances : over all coefficients, index after index; nan rows for columns set aside
    repaired : kinds of covariance that had to be made positive semidefinite
    aliased : for each index, positions of columns that earlier ones contain
    directions : (k,) directions of the first index's coefficients along which the likelihood has no maximum,
        in the order in which their observations were set aside
    separated : (n,) observations fixed at their limit
    rank : number of identified finite coefficients
    convergence : the certificate, its message naming all of the above
    """

    coefficients: tuple[Floats, ...]
    covariances: Mapping[ErrorKind, Floats]
    repaired: frozenset[ErrorKind]
    aliased: tuple[tuple[int, ...], ...]
    directions: tuple[Floats, ...]
    separated: Bools
    rank: int
    convergence: Convergence


def fit_indices(
    likelihood: IndexLikelihood,
    designs: Sequence[Floats],
    pairs: NodePairs | None = None,
    *,
    errors: bool = True,
) -> IndexFit:
    """Maximise an index likelihood.

    Parameters
    ----------
    likelihood : of n observations and m indices
    designs : m arrays (n, k); the first column is the constant 1 where the index has one
    pairs : nodes of each observation, for node-clustered covariance
    errors : False leaves out all covariances, for a fit that only another one needs

    Returns
    -------
    IndexFit. Columns that earlier ones contain are set aside. Observations that separate the data are taken
    out along an exact direction, and the rest is fitted; both are counted in the message.

    Raises
    ------
    ModelError : there is nothing left to fit
    """
    n = len(designs[0])
    keep = np.ones(n, dtype=bool)
    directions: list[Floats] = []
    while True:
        scaled = [scaled_design(d[keep]) for d in designs]
        found = _maximum_or_direction(likelihood.restricted(keep) if directions else likelihood, scaled)
        if isinstance(found, tuple):
            objective, maximum = found
            break
        moved = np.abs(scaled[0].matrix @ found) > MOVES
        keep[np.flatnonzero(keep)[moved]] = False
        directions.append(_on_original_columns(scaled[0], found))
        if not keep.any():
            return _all_separated(designs, directions)
    kinds = None
    if errors and maximum.convergence.converged:
        some_pairs = None if pairs is None else _kept_pairs(pairs, keep)
        kinds = covariances(maximum.information, objective.scores(maximum.point), some_pairs)
    return _assembled(scaled, maximum.point, kinds, directions, ~keep, maximum.convergence)


def _maximum_or_direction(
    likelihood: IndexLikelihood, scaled: Sequence[ScaledDesign]
) -> tuple[IndexObjective, Maximum] | Floats:
    """Where the search ended, or a direction along which there is no maximum."""
    direction = _surely_separating(likelihood, scaled)
    if direction is not None:
        return direction
    _refuse_too_few(len(scaled[0].matrix), scaled)
    matrices = [s.matrix for s in scaled]
    objective = IndexObjective.of(likelihood, matrices)
    negligible = NEGLIGIBLE_ON_MANY if len(matrices[0]) >= SAMPLE_FROM else NEGLIGIBLE
    maximum = newton_maximise(objective, good_start(likelihood, matrices), negligible=negligible)
    # A separated search may also end with an information matrix that has rounded to singular, so that nothing
    # seems to move any more: every uncertified end is asked about.
    if not maximum.convergence.converged:
        direction = separating_direction(scaled[0].matrix, likelihood.edges.lower, likelihood.edges.upper)
    return (objective, maximum) if direction is None else direction


def _surely_separating(likelihood: IndexLikelihood, scaled: Sequence[ScaledDesign]) -> Floats | None:
    """Look before fitting where that is cheap: when most columns are pinned by observations inside their range.

    It is cheap too where there are too few observations to fit, and they may all be separated. Otherwise,
    without any such observation (a logit) the question is a large linear programme; there Newton's steps,
    which never shrink under separation, say whether it needs to be asked.
    """
    edges = likelihood.edges
    if (edges.lower | edges.upper).all() and len(edges.lower) > _rank(scaled):
        return None
    return separating_direction(scaled[0].matrix, edges.lower, edges.upper)


def _on_original_columns(scaled: ScaledDesign, direction: Floats) -> Floats:
    """A direction on the original columns, with exact zeros for the terms that it does not move."""
    exact = np.where(np.abs(direction) > 1e-9, direction, 0.0)
    original = scaled.back @ exact
    # What is left of the constant may be the rounding of the centres that were taken off.
    return np.where(np.abs(original) > 1e-9 * (np.abs(scaled.back) @ np.abs(exact)), original, 0.0)


def _rank(scaled: Sequence[ScaledDesign]) -> int:
    return sum(len(s.kept) for s in scaled)


def _refuse_too_few(n: int, scaled: Sequence[ScaledDesign]) -> None:
    rank = _rank(scaled)
    if n <= rank:
        observations = "1 observation" if n == 1 else f"{n} observations"
        coefficients = "1 coefficient" if rank == 1 else f"{rank} coefficients"
        raise ModelError(f"{observations} cannot identify {coefficients}; use fewer covariates or more dyads")


def _kept_pairs(pairs: NodePairs, keep: Bools) -> NodePairs:
    return NodePairs(pairs.origin[keep], pairs.destination[keep], pairs.n_nodes)


def _assembled(
    scaled: Sequence[ScaledDesign],
    point: Floats,
    found: Covariances | None,
    directions: Sequence[Floats],
    separated: Bools,
    convergence: Convergence,
) -> IndexFit:
    """Back to original columns."""
    back = block_diag(*[s.back for s in scaled])
    set_aside = (back == 0).all(axis=1)
    by_kind: dict[ErrorKind, Floats] = {}
    for kind, matrix in (found.by_kind if found else {}).items():
        full = back @ matrix @ back.T
        full[set_aside, :] = np.nan
        full[:, set_aside] = np.nan
        by_kind[kind] = full
    ends = np.cumsum([s.back.shape[0] for s in scaled])[:-1]
    return IndexFit(
        coefficients=tuple(np.split(back @ point, ends)),
        covariances=by_kind,
        repaired=found.repaired if found else frozenset(),
        aliased=tuple(s.aliased for s in scaled),
        directions=tuple(directions),
        separated=separated,
        rank=len(point),
        convergence=_with_separation(convergence, int(separated.sum())),
    )


def _all_separated(designs: Sequence[Floats], directions: Sequence[Floats]) -> IndexFit:
    """Every observation sits at its limit: no finite coefficient is left, and nothing remains to be fitted."""
    n, columns = len(designs[0]), [d.shape[1] for d in designs]
    message = f"all {n} dyads separated and fixed at their limit"
    return IndexFit(
        coefficients=tuple(np.zeros(k) for k in columns),
        covariances={},
        repaired=frozenset(),
        aliased=tuple(() for _ in columns),
        directions=tuple(directions),
        separated=np.ones(n, dtype=bool),
        rank=0,
        convergence=Convergence(True, 0, 0.0, message),
    )


def _with_separation(convergence: Convergence, n_separated: int) -> Convergence:
    if not n_separated:
        return convergence
    said = f"{n_separated} separated dyads fixed at their limit"
    message = f"{convergence.message}; {said}" if convergence.message else said
    return Convergence(convergence.converged, convergence.iterations, convergence.residual, message)
