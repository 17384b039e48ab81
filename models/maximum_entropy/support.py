"""Which dyads a degree sequence leaves free: exact, for any set of dyads, in one pass over them.

The laws that match given degrees form a polytope, and the observed network is one of its corners. From that
corner a dyad can move inside (0, 1) if and only if some cycle of changes passes through it: take a link away
here, add one there, and so on, until every degree is what it was. Draw each node twice, as origin and as
destination; let a dyad without link point from its origin to its destination (it can be added) and a link
point back (it can be taken away). A dyad lies on a cycle exactly when its two ends are in one strongly
connected component. All others are fixed at what was observed; on the free ones the maximum is finite.

Unlike the removal of nodes whose degree is 0 or full, this finds every fixed dyad, also for samples that
leave dyads out. The undirected case is the directed one with each dyad drawn both ways: averaging a cycle with
its mirror image keeps it symmetric.

Sources: Rinaldo, Petrovic & Fienberg (2013) for the polytope; the cycle criterion is the usual one for
feasible circulations (Hoffman 1960).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from steelyard.datasets import Bools, Integers

__all__ = ["Support", "degree_support", "strength_support"]


@dataclass(frozen=True, eq=False)
class Support:
    """Components of the drawn graph, and what they say about every dyad, seen or not.

    Attributes
    ----------
    origin_part, destination_part : (N,) component of each node as origin and as destination
    reaches : (C, C) True where the row's component leads to the column's
    """

    origin_part: Integers
    destination_part: Integers
    reaches: Bools

    def free(self, origin: Integers, destination: Integers) -> Bools:
        """(n,) True where the maximum puts a probability strictly between 0 and 1."""
        return np.asarray(self.origin_part[origin] == self.destination_part[destination])

    def surely_linked(self, origin: Integers, destination: Integers) -> Bools:
        """(n,) True where the maximum tends to probability 1."""
        return self._leads(self.destination_part[destination], self.origin_part[origin])

    def surely_empty(self, origin: Integers, destination: Integers) -> Bools:
        """(n,) True where the maximum tends to probability 0."""
        return self._leads(self.origin_part[origin], self.destination_part[destination])

    def _leads(self, start: Integers, end: Integers) -> Bools:
        return np.asarray(self.reaches[start, end] & (start != end))


def degree_support(links: Bools, known: Bools, *, directed: bool) -> Support:
    """Components for a set of dyads.

    Parameters
    ----------
    links : (N, N) observed links, origin in rows; undirected: only i < j is read
    known : (N, N) which dyads are in the set; likewise
    directed : whether a node's degree as origin and as destination are two constraints or one
    """
    if not directed:
        links, known = links | links.T, known | known.T
    return _support(known & ~links, known & links)


def strength_support(links: Bools, known: Bools, *, directed: bool) -> Support:
    """Components where strengths are matched, not degrees: a link can then also grow, without bound.

    Parameters
    ----------
    links, known, directed : as for `degree_support`; a dyad that is not free has the expected flow 0, and one
        that no observation holds back may be sent to infinity (`surely_linked`)
    """
    if not directed:
        links, known = links | links.T, known | known.T
    return _support(known, known & links)


def _support(add: Bools, remove: Bools) -> Support:
    """Components of the graph in which flow can be added on some dyads and taken away on others."""
    n = len(add)
    rows, columns = np.nonzero(add)
    back_rows, back_columns = np.nonzero(remove)
    start = np.concatenate([rows, back_columns + n])
    end = np.concatenate([columns + n, back_rows])
    arcs = csr_array((np.ones(len(start), dtype=np.int8), (start, end)), shape=(2 * n, 2 * n))
    count, part = connected_components(arcs, directed=True, connection="strong")
    part = part.astype(np.int64)
    return Support(part[:n], part[n:], _reachability(count, part[start], part[end]))


def _reachability(count: int, start: Integers, end: Integers) -> Bools:
    """(C, C) closure of the arcs between components, by repeated squaring."""
    reaches = np.eye(count, dtype=bool)
    reaches[start, end] = True
    while True:
        # float32 products are exact here: only "zero or not" is read.
        grown = (reaches.astype(np.float32) @ reaches.astype(np.float32)) > 0
        if (grown == reaches).all():
            return reaches
        reaches = grown
