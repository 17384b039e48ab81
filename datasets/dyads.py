"""Dyads: which dyads of a network a model sees, as a view that copies nothing and can be walked in row blocks."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping, Sequence
from functools import cached_property

import numpy as np

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.datasets.covariates import Covariate, CovariateColumn, covariate_columns
from steelyard.datasets.errors import CovariateError, DataError, suggestion
from steelyard.datasets.flows import FlowNetwork, NodeColumn

__all__ = ["Dyads"]


class Dyads:
    """Some or all dyads of a flow network, in row order (by origin, then destination).

    A view: the network's arrays are shared, and the arrays below are made when first asked for, for this
    view's dyads only. Flows of dyads outside the view cannot be reached through it, so a model that is fitted
    on training dyads cannot look at the others. Undirected: each pair is one dyad, with origin < destination
    in node order.

    Parameters
    ----------
    network : the flows
    covariates : name -> definition; worked out here for the whole network
    mask : (N, N) True where a dyad belongs to the view; None for all dyads. The diagonal is ignored and so,
        when undirected, is the lower triangle

    Raises
    ------
    CovariateError : a covariate cannot be worked out
    DataError : the mask has another shape than the network
    """

    def __init__(
        self,
        network: FlowNetwork,
        covariates: Mapping[str, Covariate] | None = None,
        mask: Bools | None = None,
    ) -> None:
        self._network = network
        self._columns: Mapping[str, CovariateColumn] = covariate_columns(covariates or {}, network)
        self._mask = mask
        self._rows = range(network.n_nodes)
        if mask is not None and mask.shape != (network.n_nodes, network.n_nodes):
            raise DataError(f"a mask must be {network.n_nodes} x {network.n_nodes}; got {mask.shape}")

    def _view(self, mask: Bools | None, rows: range) -> Dyads:
        view = object.__new__(Dyads)
        view._network, view._columns, view._mask, view._rows = self._network, self._columns, mask, rows
        return view

    def select(self, mask: Bools, /) -> Dyads:
        """The dyads of this view for which the (N, N) mask is True."""
        both = mask if self._mask is None else self._mask & mask
        return self._view(both, self._rows)

    def blocks(self, most: int = 1_000_000) -> Iterator[Dyads]:
        """The same dyads in consecutive row blocks of at most about `most` dyads (never less than a row)."""
        height = max(1, most // self.n_nodes)
        if height >= len(self._rows):
            yield self
            return
        for start in range(self._rows.start, self._rows.stop, height):
            yield self._view(self._mask, range(start, min(start + height, self._rows.stop)))

    @cached_property
    def _ends(self) -> tuple[Integers, Integers]:
        first, n = self._rows.start, self.n_nodes
        inside = np.ones((len(self._rows), n), dtype=bool)
        if self._mask is not None:
            inside &= self._mask[first : self._rows.stop]
        rows = np.arange(first, self._rows.stop)
        inside[np.arange(len(rows)), rows] = False
        if not self.directed:
            inside &= np.arange(n)[None, :] > rows[:, None]
        origin, destination = np.nonzero(inside)
        return origin.astype(np.int64) + first, destination.astype(np.int64)

    @property
    def labels(self) -> tuple[str, ...]:
        """Names of all N nodes, also of those that no dyad of this view touches."""
        return self._network.labels

    @property
    def n_nodes(self) -> int:
        """N, the number of nodes of the network."""
        return self._network.n_nodes

    @property
    def directed(self) -> bool:
        """Whether i -> j and j -> i are two dyads."""
        return self._network.directed

    @property
    def unit(self) -> float:
        """The amount that one count stands for."""
        return self._network.unit

    @property
    def covariates(self) -> tuple[str, ...]:
        """Names of the covariates that these dyads know."""
        return tuple(self._columns)

    def node_column(self, name: str) -> NodeColumn:
        """(N,) values of a node column of the data."""
        return self._network.column(name)

    def __len__(self) -> int:
        return len(self.origin)

    @property
    def origin(self) -> Integers:
        """(n,) node positions of the origins."""
        return self._ends[0]

    @property
    def destination(self) -> Integers:
        """(n,) node positions of the destinations."""
        return self._ends[1]

    @cached_property
    def weights(self) -> Floats:
        """(n,) amounts in the study's unit; 0 where there is no link."""
        first = self._rows.start
        # Slicing compressed rows copies only this block's links.
        block = self._network.flows[first : self._rows.stop].toarray()
        values = block[self.origin - first, self.destination]
        return np.asarray(values / self.unit, dtype=np.float64)

    @cached_property
    def links(self) -> Bools:
        """(n,) True where a flow was observed."""
        return self.weights > 0

    @cached_property
    def counts(self) -> Floats:
        """(n,) whole numbers of the unit: amounts rounded, with every link kept at 1 at least."""
        return np.where(self.links, np.maximum(np.rint(self.weights), 1.0), 0.0)

    @property
    def n_links(self) -> int:
        """How many of these dyads carry a flow."""
        return int(self.links.sum())

    def column(self, name: str) -> Floats:
        """(n,) values of one covariate.

        Raises
        ------
        CovariateError : these dyads know no such covariate
        """
        if name not in self._columns:
            raise CovariateError(f"there is no covariate '{name}'; {suggestion(name, self._columns)}")
        return self._columns[name].values(self.origin, self.destination)

    def design(self, covariates: Sequence[str]) -> Floats:
        """(n, 1 + k) columns: a constant, then the covariates in the order given."""
        matrix = np.empty((len(self), 1 + len(covariates)), order="F")
        matrix[:, 0] = 1.0
        for position, name in enumerate(covariates, start=1):
            matrix[:, position] = self.column(name)
        return matrix

    def node_sums(self, values: Floats) -> tuple[Floats, Floats]:
        """(N,) sums of (n,) dyad values over origins and over destinations.

        Undirected: both are the sum over all dyads that touch the node.
        """
        out = np.bincount(self.origin, weights=values, minlength=self.n_nodes).astype(np.float64)
        into = np.bincount(self.destination, weights=values, minlength=self.n_nodes).astype(np.float64)
        return (out, into) if self.directed else (out + into, out + into)

    @cached_property
    def digest(self) -> str:
        """SHA-256 of which dyads these are, what is observed on them, and in which unit.

        Two views with one digest are scored on the same observations.
        """
        total = hashlib.sha256(repr((self.labels, self.directed, float(self.unit))).encode())
        for part in (self.origin, self.destination):
            total.update(part.astype("<i8").tobytes())
        total.update(self.weights.astype("<f8").tobytes())
        return total.hexdigest()
