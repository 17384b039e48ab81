"""FlowNetwork: N places, the flows between them, and what is known of places and pairs."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from steelyard.datasets.arrays import Floats
from steelyard.datasets.errors import DataError, suggestion
from steelyard.datasets.provenance import Provenance

if TYPE_CHECKING:
    from steelyard.datasets.tables import Columns

__all__ = ["FlowNetwork", "NodeColumn"]

NodeColumn: TypeAlias = "Floats | NDArray[np.str_]"


@dataclass(frozen=True, eq=False)
class FlowNetwork:
    """Flows between N places; immutable, and the only owner of the numbers.

    Parameters
    ----------
    labels : N distinct names of the places, in the order of every array below
    flows : (N, N) sparse, origin in rows, amounts >= 0 in the units of the source; no diagonal. Undirected:
        only i < j is filled, and holds the sum of both directions
    directed : whether i -> j and j -> i are two dyads or one
    unit : the amount that one count stands for
    node_columns : name -> (N,) numbers or texts; a missing number is nan
    dyad_columns : name -> (N, N) numbers, origin in rows; a missing number is nan
    provenance : where it comes from
    period : the period these flows belong to, if the source has several

    Raises
    ------
    DataError : shapes disagree, labels repeat, or a flow is negative, not finite, or from a place to itself
    """

    labels: tuple[str, ...]
    flows: csr_array
    directed: bool
    unit: float
    node_columns: Mapping[str, NodeColumn]
    dyad_columns: Mapping[str, Floats]
    provenance: Provenance
    period: str | None = None

    def __post_init__(self) -> None:
        n = len(self.labels)
        if n < 3:
            raise DataError(f"a flow network needs at least three places; got {n}: {', '.join(self.labels)}")
        if len(set(self.labels)) != n:
            raise DataError("the labels of the places must be distinct; at least one of them is repeated")
        if not np.isfinite(self.unit) or self.unit <= 0:
            raise DataError(f"unit must be a finite amount > 0; got {self.unit!r}")
        if self.flows.shape != (n, n):
            raise DataError(f"flows must be {n} x {n} for {n} places; got {self.flows.shape}")
        if not np.isfinite(self.flows.data).all() or (self.flows.data < 0).any():
            raise DataError("flows must be finite and >= 0")
        if self.flows.diagonal().any():
            raise DataError("a flow from a place to itself is not a dyad; remove the self-flows")
        self.flows.eliminate_zeros()
        self.flows.sort_indices()

    @classmethod
    def from_frames(
        cls,
        flows: Any,
        nodes: Any = None,
        dyads: Any = None,
        *,
        columns: Columns | None = None,
        directed: bool = True,
        unit: float = 1.0,
        period: str | None = None,
        provenance: Provenance | None = None,
    ) -> FlowNetwork:
        """A network from pandas tables; see `steelyard.datasets.tables.network_from_frames`."""
        from steelyard.datasets.tables import network_from_frames

        return network_from_frames(
            flows,
            nodes,
            dyads,
            columns=columns,
            directed=directed,
            unit=unit,
            period=period,
            provenance=provenance,
        )

    @property
    def n_nodes(self) -> int:
        """How many places."""
        return len(self.labels)

    @property
    def n_dyads(self) -> int:
        """How many dyads: N (N - 1), or half as many when undirected."""
        ordered = self.n_nodes * (self.n_nodes - 1)
        return ordered if self.directed else ordered // 2

    @property
    def n_links(self) -> int:
        """How many dyads carry a flow."""
        return int(self.flows.nnz)

    @property
    def total(self) -> float:
        """Sum of all flows, in the units of the source."""
        return float(self.flows.data.sum())

    def numbers(self, column: str) -> Floats:
        """A node column as (N,) numbers.

        Raises
        ------
        DataError : there is no such column, or it holds texts
        """
        values = self.column(column)
        if values.dtype.kind != "f":
            row = next((i for i, text in enumerate(values) if not _is_number(str(text))), 0)
            raise DataError(
                f"node column '{column}' must hold numbers; got '{values[row]}' for {self.labels[row]}"
            )
        return np.asarray(values, dtype=np.float64)

    def column(self, column: str) -> NodeColumn:
        """A node column as it is, numbers or texts."""
        if column not in self.node_columns:
            hint = suggestion(column, self.node_columns)
            raise DataError(f"the data have no node column '{column}'; {hint}")
        return self.node_columns[column]

    def matrix(self, column: str) -> Floats:
        """A dyad column as (N, N) numbers, origin in rows."""
        if column not in self.dyad_columns:
            hint = suggestion(column, self.dyad_columns)
            raise DataError(f"the data have no dyad column '{column}'; {hint}")
        return self.dyad_columns[column]

    @cached_property
    def digest(self) -> str:
        """SHA-256 of everything that a fit or a score can depend on."""
        total = hashlib.sha256()
        total.update(repr((self.labels, self.directed, float(self.unit), self.period)).encode())
        for part in (self.flows.indptr, self.flows.indices):
            total.update(np.asarray(part, dtype="<i8").tobytes())
        total.update(np.asarray(self.flows.data, dtype="<f8").tobytes())
        for name, values in sorted(self.node_columns.items()):
            total.update(name.encode())
            total.update(_canonical_bytes(values))
        for name, matrix in sorted(self.dyad_columns.items()):
            total.update(name.encode())
            total.update(_canonical_bytes(matrix))
        return total.hexdigest()


def _canonical_bytes(values: NDArray[Any]) -> bytes:
    if values.dtype.kind == "f":
        return np.ascontiguousarray(values, dtype="<f8").tobytes()
    return repr([str(v) for v in values]).encode()


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True
