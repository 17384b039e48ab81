"""Sums over nodes, and columns with node effects taken out, without a column of zeros and ones for each node."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg import cho_factor, cho_solve

from steelyard.datasets.arrays import Floats, Integers
from steelyard.models.errors import ModelError
from steelyard.models.maximum_entropy.degree_equations import gauge_directions
from steelyard.models.maximum_entropy.support import Support
from steelyard.models.node_effects import EffectEnds, NodeEffects

__all__ = ["Incidence"]


@dataclass(frozen=True, eq=False)
class Incidence:
    """Which effects enter which dyads: the matrix E of zeros and ones, (n, P), kept as positions.

    Attributes
    ----------
    positions : one or two (n,) arrays of effects below P = `size`
    nodes : (side, nodes) of the effects, in their order
    gauge : (P, g) directions of -1, 0 and 1 that change no dyad: a component's first ends up, its second down
    """

    positions: tuple[Integers, ...]
    nodes: tuple[tuple[int, Integers], ...]
    gauge: Floats

    @classmethod
    def of(cls, ends: EffectEnds, support: Support) -> Incidence:
        """For dyads all of which are free under `support`; effects of nodes without a dyad are left out."""
        nodes = tuple((side, np.flatnonzero(ends.seen(side))) for _, side in ends.kind.roles)
        places, offset = [], 0
        for _, members in nodes:
            place = np.zeros(ends.n_nodes, dtype=np.int64)
            place[members] = offset + np.arange(len(members))
            places.append(place)
            offset += len(members)
        if ends.kind is NodeEffects.NODE:
            positions: tuple[Integers, ...] = (places[0][ends.first], places[0][ends.second])
        else:
            sides = (ends.first, ends.second)
            positions = tuple(place[sides[side]] for place, (side, _) in zip(places, nodes, strict=True))
        return cls(positions, nodes, _gauge(ends.kind, nodes, support))

    @property
    def size(self) -> int:
        """P, the number of effects."""
        return len(self.gauge)

    @property
    def rank(self) -> int:
        """How many of them the dyads identify."""
        return int(self.gauge.shape[0] - self.gauge.shape[1])

    def sums(self, values: Floats) -> Floats:
        """(P,) E'v: for each effect the sum over its dyads."""
        return np.asarray(
            sum(np.bincount(p, weights=values, minlength=self.size) for p in self.positions), dtype=np.float64
        )

    def column_sums(self, columns: Floats) -> Floats:
        """(P, k) the same for each column."""
        found = np.empty((self.size, columns.shape[1]))
        for column, values in enumerate(columns.T):
            found[:, column] = self.sums(values)
        return found

    def spread(self, effects: Floats) -> Floats:
        """(n,) or (n, k) E e: for each dyad the sum of its effects."""
        total: Floats = effects[self.positions[0]]
        for position in self.positions[1:]:
            total = total + effects[position]
        return total

    def blocks(self, weights: Floats) -> Floats:
        """(P, P) E'WE."""
        size = self.size
        matrix = np.zeros((size, size))
        if len(self.positions) == 2:
            flat = self.positions[0] * size + self.positions[1]
            across = np.bincount(flat, weights=weights, minlength=size * size).reshape(size, size)
            matrix += across
            matrix += across.T
        matrix[np.diag_indices(size)] += self.sums(weights)
        return matrix

    def anchors(self, strengths: Floats) -> Floats:
        """(P, g) columns h such that E'WE + h h' is as well conditioned as E'WE is off the gauge, E'w = strengths."""
        turned = self.gauge * strengths[:, None]
        return np.asarray(turned / np.sqrt(np.abs(turned).sum(axis=0)))

    def in_gauge(self, effects: Floats) -> Floats:
        """(P,) or (P, k) effects of the same dyads whose first and second ends have equal sums in each component."""
        lengths = np.abs(self.gauge).sum(axis=0)
        return np.asarray(effects - (self.gauge / lengths) @ (self.gauge.T @ effects))

    def without_effects(self, columns: Floats, weights: Floats | None = None) -> tuple[Floats, Floats]:
        """Take the effects out of columns by (weighted) least squares.

        Returns
        -------
        (n, k) what is left of the columns, and (P, k) the effects C with left = columns - E C

        Raises
        ------
        ModelError : weights so uneven that the effects cannot be told apart
        """
        one = np.ones(len(columns)) if weights is None else weights
        strengths = self.sums(one)
        anchor = self.anchors(strengths)
        root = np.sqrt(strengths)
        try:
            factor = cho_factor(
                (self.blocks(one) + anchor @ anchor.T) / np.outer(root, root), overwrite_a=True
            )
        except np.linalg.LinAlgError:
            raise ModelError(
                "the node effects cannot be told apart: some nodes hang together by almost no expected flow"
            ) from None
        left, effects = columns, np.zeros((self.size, columns.shape[1]))
        # The second pass takes out what the rounding of the first one left.
        for _ in range(2):
            sums = self.column_sums(left * one[:, None]) / root[:, None]
            change = cho_solve(factor, sums) / root[:, None]
            effects += change
            left = left - self.spread(change)
        return left, effects


def _gauge(kind: NodeEffects, nodes: tuple[tuple[int, Integers], ...], support: Support) -> Floats:
    if len(nodes) == 1 and kind is not NodeEffects.NODE:
        return np.zeros((len(nodes[0][1]), 0))
    origins, destinations = nodes[0][1], nodes[-1][1]
    found = gauge_directions(
        support.origin_part[origins],
        support.destination_part[destinations],
        directed=kind is not NodeEffects.NODE,
    )
    return np.sign(found)
