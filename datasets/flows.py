"""FlowNetwork: N places, the flows between them, and what is known of places and pairs."""

from __future__ import annotations

import hashlib
import math
from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from steelyard.datasets.arrays import Floats, read_only
from steelyard.datasets.errors import DataError, suggestion
from steelyard.datasets.provenance import Provenance

if TYPE_CHECKING:
    from steelyard.datasets.tables import Columns

__all__ = ["FlowNetwork", "NodeColumn"]

NodeColumn: TypeAlias = "Floats | NDArray[np.str_]"


@dataclass(frozen=True, eq=False)
class FlowNetwork:
    """Flows between N places; immutable, and the only owner of the numbers.

    The flows are copied; the columns are kept as read-only views of the arrays given.

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
    refused_columns : name -> why, for dyad columns of the source that cannot be used; asking for one says so

    Raises
    ------
    DataError : shapes disagree, labels repeat, or a flow is negative, not finite, from a place to itself, or
        (undirected) below the diagonal
    """

    labels: tuple[str, ...]
    flows: csr_array
    directed: bool
    unit: float
    node_columns: Mapping[str, NodeColumn]
    dyad_columns: Mapping[str, Floats]
    provenance: Provenance
    period: str | None = None
    refused_columns: Mapping[str, str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        labels = tuple(str(label) for label in self.labels)
        _check_labels(labels)
        if not np.isfinite(self.unit) or self.unit <= 0:
            raise DataError(f"unit must be a finite amount > 0; got {self.unit!r}")
        kept: dict[str, object] = {
            "labels": labels,
            "flows": _checked_flows(self.flows, labels, self.directed),
            "node_columns": MappingProxyType(
                {name: _checked_column(name, values, labels) for name, values in self.node_columns.items()}
            ),
            "dyad_columns": MappingProxyType(
                {name: _checked_matrix(name, values, labels) for name, values in self.dyad_columns.items()}
            ),
            "refused_columns": MappingProxyType(dict(self.refused_columns)),
        }
        for name, value in kept.items():
            object.__setattr__(self, name, value)

    def __reduce__(self) -> tuple[type[FlowNetwork], tuple[object, ...]]:
        # Built anew in the worker process: read-only there as well, and without what was only cached here.
        mappings = (dict(self.node_columns), dict(self.dyad_columns))
        rest = (self.provenance, self.period, dict(self.refused_columns))
        return type(self), (self.labels, self.flows, self.directed, self.unit, *mappings, *rest)

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
                f"node column '{column}' must hold finite numbers; got '{values[row]}' for {self.labels[row]}; "
                "mend the column, or leave the cell empty where the number is missing"
            )
        return np.asarray(values, dtype=np.float64)

    def column(self, column: str) -> NodeColumn:
        """A node column as it is, numbers or texts.

        Raises
        ------
        DataError : there is no such column
        """
        if column not in self.node_columns:
            hint = suggestion(column, self.node_columns)
            raise DataError(f"the data have no node column '{column}'; {hint}")
        return self.node_columns[column]

    def matrix(self, column: str) -> Floats:
        """A dyad column as (N, N) numbers, origin in rows.

        Raises
        ------
        DataError : there is no such column, or it cannot be used
        """
        if column in self.refused_columns:
            raise DataError(self.refused_columns[column])
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


def _check_labels(labels: tuple[str, ...]) -> None:
    if len(labels) < 3:
        raise DataError(
            f"a flow network needs at least three places; got {len(labels)}: {', '.join(labels) or 'none'}"
        )
    if len(set(labels)) != len(labels):
        repeated = next(label for label, times in Counter(labels).items() if times > 1)
        raise DataError(f"the labels of the places must be distinct; '{repeated}' is repeated")


def _checked_flows(flows: csr_array, labels: tuple[str, ...], directed: bool) -> csr_array:
    """A read-only copy without stored zeros, its indices sorted."""
    n = len(labels)
    if flows.shape != (n, n):
        raise DataError(f"flows must be {n} x {n} for {n} places; got {flows.shape}")
    found = csr_array(flows, dtype=np.float64, copy=True)
    found.sum_duplicates()
    found.eliminate_zeros()
    origin, destination = found.nonzero()
    rules = [
        (~np.isfinite(found.data) | (found.data < 0), "a flow must be finite and >= 0"),
        (origin == destination, "a flow from a place to itself is not a dyad; remove the self-flows"),
    ]
    if not directed:
        rule = "an undirected network keeps the sum of a pair at the place that is listed first"
        rules.append((origin > destination, rule))
    for bad, rule in rules:
        if bad.any():
            k = int(np.flatnonzero(bad)[0])
            raise DataError(
                f"{rule}; got {found.data[k]:g} for {labels[origin[k]]} -> {labels[destination[k]]} "
                f"({int(bad.sum())} of {len(bad)} flows break this rule)"
            )
    for part in (found.data, found.indices, found.indptr):
        part.flags.writeable = False
    return found


def _checked_column(name: str, values: NodeColumn, labels: tuple[str, ...]) -> NodeColumn:
    """A node column as floats or texts, read-only."""
    found: NDArray[Any] = np.asarray(values)
    if found.shape != (len(labels),):
        raise DataError(f"node column '{name}' must hold {len(labels)} values; got shape {found.shape}")
    if found.dtype.kind not in "fiub":
        return read_only(found.astype(np.str_, copy=False))
    numbers = found.astype(np.float64, copy=False)
    _refuse_infinite(f"node column '{name}'", numbers)
    return read_only(numbers)


def _checked_matrix(name: str, values: Floats, labels: tuple[str, ...]) -> Floats:
    n = len(labels)
    values = np.asarray(values, dtype=np.float64)
    if values.shape != (n, n):
        raise DataError(f"dyad column '{name}' must be {n} x {n}, origin in rows; got shape {values.shape}")
    _refuse_infinite(f"dyad column '{name}'", values)
    return read_only(values)


def _refuse_infinite(subject: str, values: Floats) -> None:
    if np.isinf(values).any():
        raise DataError(
            f"{subject} must hold finite numbers, or nan where one is missing; got an infinite one"
        )


def _canonical_bytes(values: NDArray[Any]) -> bytes:
    if values.dtype.kind == "f":
        return np.ascontiguousarray(values, dtype="<f8").tobytes()
    return repr([str(v) for v in values]).encode()


def _is_number(text: str) -> bool:
    """Whether the text is a finite number; the empty text is a missing one, and no reason to complain."""
    try:
        return text.strip() == "" or math.isfinite(float(text))
    except ValueError:
        return False
