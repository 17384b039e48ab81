"""Separation of counts when node effects enter the mean, decided exactly before anything is fitted.

A zero is separated when effects and slopes can push its mean to 0 for ever while no positive flow moves and no
other zero rises. Two questions in turn decide it, until neither finds anything:

* Can the effects alone do it? A zero stays when flow can be moved round a cycle through it (strong components,
  see `maximum_entropy.support`); the simplest case is a node without any flow.
* Can slopes help? Only slopes that move no positive flow can, that is, covariates that the effects contain on
  the positive flows. There are hardly ever any; if there are, a linear programme in those slopes and in one
  offset for each component of the positive flows decides.

Sources: Correia, Guimaraes & Zylkin (2019) for the definition; Santos Silva & Tenreyro (2010).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np
from scipy.optimize import linprog
from scipy.sparse import csr_array, hstack

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.effect_design import EffectDesign, effect_design
from steelyard.models.effect_incidence import Incidence
from steelyard.models.errors import ModelError
from steelyard.models.maximum_entropy.support import Support, strength_support
from steelyard.models.node_effects import EffectEnds, NodeEffects

__all__ = ["Direction", "EffectSeparation", "Stage", "effect_separation"]

# Above the 1e-7 to which the linear programme keeps its constraints.
MOVES = 1e-6
ROWS_AT_FIRST = 2_000
SAME = 1e-9
DUST = 1e-5


@dataclass(frozen=True, eq=False)
class Direction:
    """A way to infinity: (k,) slopes and (N,) effects of the first and second ends."""

    slopes: Floats
    first: Floats
    second: Floats

    def moves(self, columns: Floats, ends: EffectEnds) -> Floats:
        """(n,) how fast the index of each dyad moves along it; exactly 0 where it stands still."""
        parts = (columns * self.slopes, self.first[ends.first], self.second[ends.second])
        move = parts[0].sum(axis=1) + parts[1] + parts[2]
        size = np.abs(parts[0]).sum(axis=1) + np.abs(parts[1]) + np.abs(parts[2])
        return np.where(np.abs(move) > MOVES + 1e-14 * size, move, 0.0)


Stage: TypeAlias = Support | Direction


@dataclass(frozen=True, eq=False)
class EffectSeparation:
    """What was set aside, and what is left.

    Attributes
    ----------
    stages : in the order in which they decide a dyad; the last one is a Support, of the dyads that are left
    keep : (n,) dyads with a finite maximum
    design : effects and covariates on those; None when no dyad is left
    """

    stages: tuple[Stage, ...]
    keep: Bools
    design: EffectDesign | None


def effect_separation(links: Bools, columns: Floats, ends: EffectEnds) -> EffectSeparation:
    """Set the separated dyads aside.

    Parameters
    ----------
    links : (n,) which flows are positive
    columns : (n, k) covariates without a constant
    ends : whose effects enter each dyad
    """
    keep = np.ones(len(links), dtype=bool)
    stages: list[Stage] = []
    while True:
        support = _support(links[keep], ends.restricted(keep))
        stages.append(support)
        keep &= support.free(ends.first, ends.second)
        if not keep.any():
            return EffectSeparation(tuple(stages), keep, None)
        kept = ends.restricted(keep)
        design = effect_design(columns[keep], Incidence.of(kept, support))
        direction = _direction(links[keep], kept, design)
        if direction is None:
            return EffectSeparation(tuple(stages), keep, design)
        moved = direction.moves(columns[keep], kept) != 0.0
        if not moved.any() or moved[links[keep]].any():
            # Rounding was taken for a direction: whether the fit is one, its certificate will say.
            return EffectSeparation(tuple(stages), keep, design)
        stages.append(direction)
        keep[np.flatnonzero(keep)[moved]] = False


def _support(links: Bools, ends: EffectEnds) -> Support:
    shape = (ends.n_nodes, ends.n_nodes)
    known, linked = np.zeros(shape, dtype=bool), np.zeros(shape, dtype=bool)
    known[ends.first, ends.second] = True
    linked[ends.first[links], ends.second[links]] = True
    return strength_support(linked, known, directed=ends.kind is not NodeEffects.NODE)


def _direction(links: Bools, ends: EffectEnds, design: EffectDesign) -> Direction | None:
    """A direction that moves no positive flow and lowers some zeros, if there is one."""
    if design.matrix.shape[1] == 0 or links.all():
        return None
    linked_ends = ends.restricted(links)
    # With links for all it knows, the support's parts are the components of the positive flows.
    linked = Incidence.of(linked_ends, _support(np.ones(int(links.sum()), dtype=bool), linked_ends))
    left, taken = linked.without_effects(design.matrix[links])
    still = _null_space(left, max(SAME, design.rounding))
    if still.shape[1] == 0:
        return None
    offsets = -taken @ still
    zeros = Incidence(
        tuple(p[~links] for p in design.incidence.positions), design.incidence.nodes, linked.gauge
    )
    slopes_part = design.matrix[~links] @ still + zeros.spread(offsets)
    gauge = csr_array(linked.gauge)
    gauge_part = sum((gauge[p] for p in zeros.positions[1:]), start=gauge[zeros.positions[0]])
    rows = csr_array(hstack([csr_array(slopes_part), gauge_part]))
    answer = _lowered(rows)
    if answer is None:
        return None
    answer = _cleaned(rows, answer, still)
    reduced = still @ answer[: still.shape[1]]
    effects = offsets @ answer[: still.shape[1]] + linked.gauge @ answer[still.shape[1] :]
    slopes = design.back @ np.where(np.abs(reduced) > SAME, reduced, 0.0)
    return _on_nodes(design.original_effects(effects, slopes), slopes, design.incidence, ends)


def _null_space(left: Floats, limit: float) -> Floats:
    """(r, q) slopes that move no positive flow; the columns are of unit scale, so the limit is absolute."""
    triangle = np.linalg.qr(left / np.sqrt(len(left)), mode="r")
    _, sizes, rows = np.linalg.svd(triangle)
    full = np.concatenate([sizes, np.zeros(left.shape[1] - len(sizes))])
    return np.asarray(rows[full <= limit].T)


def _lowered(rows: csr_array) -> Floats | None:
    """(q,) entries in [-1, 1] that raise no row and lower some, as many as can be; None when none can fall.

    Rows enter the programme as they are violated, since a few of a million decide.
    """
    n = rows.shape[0]
    aim = np.asarray(rows.sum(axis=0)).ravel()
    active = np.unique(np.linspace(0, n - 1, min(n, ROWS_AT_FIRST)).astype(np.int64))
    while True:
        some = rows[active]
        answer = linprog(aim, A_ub=some, b_ub=np.zeros(len(active)), bounds=(-1.0, 1.0), method="highs")
        if answer.status != 0:
            raise ModelError(f"the search for separated dyads failed: {answer.message}")
        moved = np.asarray(rows @ answer.x)
        broken = np.flatnonzero(moved > MOVES / 2)
        worst = broken[np.argsort(-moved[broken], kind="stable")[:ROWS_AT_FIRST]]
        new = np.setdiff1d(worst, active)
        if not len(new):
            return np.asarray(answer.x) if (moved < -MOVES).any() else None
        active = np.union1d(active, new)


def _cleaned(rows: csr_array, answer: Floats, still: Floats) -> Floats:
    """The answer without the dust that the programme's tolerance leaves on slopes that need not move."""
    slopes = still @ answer[: still.shape[1]]
    clean = np.where(np.abs(slopes) > DUST * np.abs(slopes).max(), slopes, 0.0)
    inside = still.T @ clean
    other = np.concatenate([inside, answer[still.shape[1] :]])
    same = np.abs(still @ inside - clean).max() <= SAME
    return other if same and np.asarray(rows @ other).max() <= MOVES / 2 else answer


def _on_nodes(effects: Floats, slopes: Floats, incidence: Incidence, ends: EffectEnds) -> Direction:
    sides = [np.zeros(ends.n_nodes), np.zeros(ends.n_nodes)]
    offset = 0
    for side, members in incidence.nodes:
        sides[side][members] = effects[offset : offset + len(members)]
        offset += len(members)
    if ends.kind is NodeEffects.NODE:
        sides[1] = sides[0]
    return Direction(slopes, sides[0], sides[1])
