"""Which effects of nodes a linear index holds, and who they belong to on each dyad."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np

from steelyard.datasets.arrays import Bools, Integers

__all__ = ["EffectEnds", "NodeEffects"]


class NodeEffects(Enum):
    """One effect for each node and role, added to the index of every dyad that the node is part of.

    NODE : one effect a node, entering at both ends; the only kind that undirected networks can have
    """

    ORIGIN = "origin"
    DESTINATION = "destination"
    ORIGIN_AND_DESTINATION = "origin and destination"
    NODE = "node"

    @classmethod
    def chosen(cls, *, origin: bool, destination: bool, node: bool) -> NodeEffects | None:
        """The kind that three switches ask for; None for none. `node` goes alone."""
        if node:
            return cls.NODE
        if origin and destination:
            return cls.ORIGIN_AND_DESTINATION
        if origin:
            return cls.ORIGIN
        return cls.DESTINATION if destination else None

    @property
    def roles(self) -> tuple[tuple[str, int], ...]:
        """(suffix of the term, side) of each role: side 0 holds the first ends, side 1 the second ends."""
        return {
            NodeEffects.ORIGIN: ((":origin", 0),),
            NodeEffects.DESTINATION: ((":destination", 1),),
            NodeEffects.ORIGIN_AND_DESTINATION: ((":origin", 0), (":destination", 1)),
            NodeEffects.NODE: (("", 0),),
        }[self]

    def ends(self, origin: Integers, destination: Integers, n_nodes: int) -> EffectEnds:
        """Whose effects enter each dyad. A role without effects is played by one and the same node, 0."""
        nobody = np.zeros(len(origin), dtype=np.int64)
        first = nobody if self is NodeEffects.DESTINATION else origin
        second = nobody if self is NodeEffects.ORIGIN else destination
        return EffectEnds(self, first, second, n_nodes)


@dataclass(frozen=True, eq=False)
class EffectEnds:
    """(n,) node positions below `n_nodes` whose effects enter each dyad, as first and as second end."""

    kind: NodeEffects
    first: Integers
    second: Integers
    n_nodes: int

    def restricted(self, keep: Bools) -> EffectEnds:
        """The same for some of the dyads."""
        return EffectEnds(self.kind, self.first[keep], self.second[keep], self.n_nodes)

    def seen(self, side: int) -> Bools:
        """(N,) which nodes some dyad touches on a side; with one effect a node, on either side."""
        found = np.zeros(self.n_nodes, dtype=bool)
        if side == 0 or self.kind is NodeEffects.NODE:
            found[self.first] = True
        if side == 1 or self.kind is NodeEffects.NODE:
            found[self.second] = True
        return found
