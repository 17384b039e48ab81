"""Dyads: which dyads of a network a model sees, as a view that copies nothing and can be walked in row blocks."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from functools import cached_property
from typing import Any

import numpy as np

from steelyard.datasets.arrays import Bools, Floats, Integers, read_only
from steelyard.datasets.covariates import Covariate, CovariateColumn, covariate_columns
from steelyard.datasets.errors import CovariateError, DataError, suggestion
from steelyard.datasets.flows import FlowNetwork, NodeColumn

__all__ = ["Dyads"]


class Dyads:
    """Some or all dyads of a flow network, in row order (by origin, then destination).

    A view: the network's arrays are shared, and the arrays below are made when first asked for, for this
    view's dyads only. Flows of dyads outside the view cannot be reached through it, so a model that is fitted
    on training dyads cannot look at the others. Undirected: each pair is one dyad, with origin < destination
    in node order. Arrays that the view keeps are read-only. What is cached stays behind when a view is pickled.

    Parameters
    ----------
    network : the flows
    covariates : name -> definition; worked out here for the whole network
    mask : (N, N) True where a dyad belongs to the view; None for all dyads. The diagonal is ignored and so,
        when undirected, is the lower triangle

    Raises
    ------
    CovariateError : a covariate cannot be worked out
    DataError : the mask has another shape than the network, or does not hold booleans
    """

    def __init__(
        self,
        network: FlowNetwork,
        covariates: Mapping[str, Covariate] | None = None,
        mask: Bools | None = None,
    ) -> None:
        self._columns: Mapping[str, CovariateColumn] = covariate_columns(covariates or {}, network)
        # The covariates are worked out; the matrices they came from need not travel with every view.
        self._network = replace(network, dyad_columns={}, refused_columns={})
        self._mask = None if mask is None else self._checked(mask)
        self._rows = range(network.n_nodes)

    def __getstate__(self) -> dict[str, Any]:
        kept = ("_network", "_columns", "_mask", "_rows", "digest")
        return {name: self.__dict__[name] for name in kept if name in self.__dict__}

    def _checked(self, mask: Bools) -> Bools:
        """A copy of a mask that is True on dyads only."""
        n = self.n_nodes
        if mask.shape != (n, n) or mask.dtype != np.bool_:
            raise DataError(f"a mask must be {n} x {n} booleans; got {mask.dtype} of shape {mask.shape}")
        if not self.directed:
            return np.triu(mask, 1)
        copied = mask.copy()
        np.fill_diagonal(copied, False)
        return copied

    def _view(self, mask: Bools | None, rows: range) -> Dyads:
        view = object.__new__(Dyads)
        view._network, view._columns, view._mask, view._rows = self._network, self._columns, mask, rows
        return view

    def select(self, mask: Bools, /) -> Dyads:
        """The dyads of this view for which the (N, N) mask is True.

        Raises
        ------
        DataError : the mask has another shape than the network, or does not hold booleans
        """
        checked = self._checked(mask)
        return self._view(checked if self._mask is None else self._mask & checked, self._rows)

    def with_column(self, name: str, values: Floats, /) -> Dyads:
        """The same dyads with one covariate more, (n,) finite values; it is 0 on dyads outside the view.

        Raises
        ------
        CovariateError : the name is taken, or the values are not n finite numbers
        """
        if name in self._columns:
            raise CovariateError(f"the covariate '{name}' exists already; choose another name")
        if values.shape != (len(self),) or not np.isfinite(values).all():
            raise CovariateError(
                f"the covariate '{name}' must have {len(self)} finite values, one for each dyad"
            )
        matrix = np.zeros((self.n_nodes, self.n_nodes))
        matrix[self.origin, self.destination] = values
        view = self._view(self._mask, self._rows)
        view._columns = {**self._columns, name: CovariateColumn(matrix=matrix)}
        return view

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
        if self._mask is not None:
            inside = self._mask[first : self._rows.stop]
        else:
            rows, columns = np.arange(first, self._rows.stop)[:, None], np.arange(n)[None, :]
            inside = columns != rows if self.directed else columns > rows
        origin, destination = np.nonzero(inside)
        return read_only(origin.astype(np.int64) + first), read_only(destination.astype(np.int64))

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
        if self._mask is not None:
            return int(np.count_nonzero(self._mask[self._rows.start : self._rows.stop]))
        n = self.n_nodes
        return sum(n - 1 if self.directed else n - 1 - row for row in self._rows)

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
        return read_only(np.asarray(values / self.unit, dtype=np.float64))

    @cached_property
    def links(self) -> Bools:
        """(n,) True where a flow was observed."""
        return read_only(self.weights > 0)

    @cached_property
    def counts(self) -> Floats:
        """(n,) whole numbers of the unit: amounts rounded, with every link kept at 1 at least."""
        return read_only(np.where(self.links, np.maximum(np.rint(self.weights), 1.0), 0.0))

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
        parts = [hashlib.sha256() for _ in range(3)]
        for block in self.blocks():
            for part, values in zip(parts, (block.origin, block.destination, block.weights), strict=True):
                part.update(values.astype("<i8" if values.dtype.kind == "i" else "<f8").tobytes())
        for part in parts:
            total.update(part.digest())
        return total.hexdigest()
