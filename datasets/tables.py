"""From pandas tables (flows, nodes, dyads) to a FlowNetwork, with every problem named at once."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from scipy.sparse import csr_array

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.datasets.errors import DataError, suggestion
from steelyard.datasets.flows import FlowNetwork, NodeColumn
from steelyard.datasets.provenance import Provenance

__all__ = ["Columns", "network_from_frames"]


@dataclass(frozen=True)
class Columns:
    """Which columns of the user's tables play which part.

    `origin` and `destination` are read in the flows and dyads tables, `flow` in the flows table, `node` in
    the nodes table, `period` (if any) in every table that has it.
    """

    origin: str = "origin"
    destination: str = "destination"
    flow: str = "flow"
    node: str = "node"
    period: str | None = None


@dataclass
class _Problems:
    """Collects sentences, so that a user mends a table in one go."""

    found: list[str] = field(default_factory=list)

    def rows(self, frame: Any, table: str, bad: Bools, rule: str, show: str) -> None:
        """Note the first bad row of a table and how many there are; `rule` says what must hold."""
        if not bad.any():
            return
        first = int(np.flatnonzero(bad)[0])
        got = str(frame[show].iloc[first])
        count = int(bad.sum())
        many = f"; {count} of {len(frame)} rows break this rule" if count > 1 else ""
        row = _row_number(frame, first)
        self.found.append(f"{table}, row {row}, column '{show}': {rule}; got '{got}'{many}")

    def stop_if_any(self) -> None:
        if self.found:
            raise DataError(*self.found)


def _row_number(frame: Any, position: int) -> int:
    """Row of a file as a spreadsheet counts it: the header is row 1. Filters keep the original index."""
    return int(frame.index[position]) + 2


def network_from_frames(
    flows: Any,
    nodes: Any = None,
    dyads: Any = None,
    *,
    columns: Columns | None = None,
    directed: bool = True,
    unit: float = 1.0,
    period: str | None = None,
    provenance: Provenance | None = None,
    names: tuple[str, str, str] = ("flows", "nodes", "dyads"),
) -> FlowNetwork:
    """Build and check a network.

    Parameters
    ----------
    flows : table with an origin, a destination and a flow column; pairs that are not listed have no flow
    nodes : table keyed by the node column; without it the places are those that the flows name, sorted
    dyads : table keyed by origin and destination. A directed network needs both directions; an undirected one
        takes either, and refuses two that differ
    columns : names of the key columns
    directed : False sums the two directions
    unit : the amount that one count stands for
    period : which period to keep, where the tables have several
    names : what to call the three tables in messages, usually their file names

    Raises
    ------
    DataError : with one sentence for each rule that the tables break
    """
    columns = columns or Columns()
    flows = _one_period(flows, names[0], columns, period)
    problems = _Problems()
    labels = _labels(flows, nodes, columns, names, period, problems)
    positions = {label: i for i, label in enumerate(labels)}
    matrix = _flow_matrix(flows, names[0], columns, positions, problems)
    problems.stop_if_any()
    node_columns = _node_columns(nodes, names[1], columns, period)
    dyad_columns = _dyad_columns(dyads, names[2], columns, period, positions, directed)
    provenance = provenance or Provenance(source="not stated")
    if period is not None and columns.period is not None:
        provenance = provenance.after(f"period {period} selected")
    if not directed:
        matrix = csr_array(np.triu(matrix.toarray() + matrix.toarray().T, 1))
        provenance = provenance.after("the two directions of each pair summed")
    if unit != 1.0:
        provenance = provenance.after(f"amounts divided by the unit {unit:g}")
    return FlowNetwork(
        labels=tuple(labels),
        flows=matrix,
        directed=directed,
        unit=float(unit),
        node_columns=node_columns,
        dyad_columns=dyad_columns,
        provenance=provenance,
        period=period,
    )


def _require(frame: Any, table: str, *wanted: str) -> None:
    """Refuse a table that lacks a key column, naming the nearest that it has."""
    have = [str(c) for c in frame.columns]
    missing = [w for w in wanted if w not in have]
    if missing:
        raise DataError(
            *(
                f"{table} has no column '{w}'; {suggestion(w, have)} (or name it under columns)"
                for w in missing
            )
        )


def _one_period(frame: Any, table: str, columns: Columns, period: str | None) -> Any:
    """The rows of one period; a table without a period column holds for every period."""
    if frame.index.dtype.kind != "i":
        frame = frame.reset_index(drop=True)
    if columns.period is None or columns.period not in frame.columns:
        return frame
    found = sorted({str(p) for p in frame[columns.period]})
    if period is None:
        if len(found) > 1:
            raise DataError(
                f"{table} holds {len(found)} periods ({found[0]} ... {found[-1]}); choose one with period = ..."
            )
        return frame
    if str(period) not in found:
        raise DataError(f"{table} has no period '{period}'; it holds {', '.join(found)}")
    return frame[frame[columns.period].astype(str) == str(period)]


def _labels(
    flows: Any,
    nodes: Any,
    columns: Columns,
    names: tuple[str, str, str],
    period: str | None,
    problems: _Problems,
) -> list[str]:
    """The places: the nodes table in its own order, or whatever the flows name, sorted."""
    _require(flows, names[0], columns.origin, columns.destination, columns.flow)
    if nodes is None:
        return sorted({str(v) for c in (columns.origin, columns.destination) for v in flows[c]})
    nodes = _one_period(nodes, names[1], columns, period)
    _require(nodes, names[1], columns.node)
    labels = [str(v) for v in nodes[columns.node]]
    series = pd.Series(labels, dtype=object)
    problems.rows(
        nodes, names[1], series.duplicated().to_numpy(), "each place must be listed once", columns.node
    )
    problems.rows(nodes, names[1], (series == "").to_numpy(), "a place must have a label", columns.node)
    return labels


def _flow_matrix(
    flows: Any, table: str, columns: Columns, positions: dict[str, int], problems: _Problems
) -> csr_array:
    """Sparse (N, N) flows, origin in rows; problems are noted, and then the matrix must not be used."""
    origin, destination = _ends(flows, table, columns, positions, problems)
    amount = _numbers(flows[columns.flow])
    problems.rows(flows, table, ~np.isfinite(amount), "a flow must be a finite number", columns.flow)
    problems.rows(flows, table, amount < 0, "a flow must be >= 0", columns.flow)
    known = (origin >= 0) & (destination >= 0)
    same = known & (origin == destination) & (amount != 0)
    problems.rows(
        flows, table, same, "a flow from a place to itself is not a dyad; remove the row", columns.origin
    )
    keys = np.where(known, origin * len(positions) + destination, -1 - np.arange(len(origin)))
    twice = pd.Series(keys).duplicated().to_numpy()
    rule = "each ordered pair must be listed once; sum or remove the repeated rows"
    problems.rows(flows, table, twice, rule, columns.origin)
    if problems.found:
        return csr_array((len(positions), len(positions)))
    keep = (amount > 0) & (origin != destination)
    shape = (len(positions), len(positions))
    return csr_array((amount[keep], (origin[keep], destination[keep])), shape=shape)


def _ends(
    frame: Any, table: str, columns: Columns, positions: dict[str, int], problems: _Problems
) -> tuple[Integers, Integers]:
    """Positions of both ends of each row; an unknown place is -1 and noted."""
    ends = []
    for column in (columns.origin, columns.destination):
        index = np.array([positions.get(str(v), -1) for v in frame[column]], dtype=np.int64)
        problems.rows(frame, table, index < 0, "the place must be listed in the nodes table", column)
        ends.append(index)
    return ends[0], ends[1]


def _numbers(series: Any) -> Floats:
    """Texts or numbers as floats; what is no number becomes nan."""
    return np.asarray(pd.to_numeric(series, errors="coerce"), dtype=np.float64)


def _is_numeric(series: Any) -> bool:
    """Whether every filled cell is a number; a column of empty cells is not."""
    texts = [str(v).strip() for v in series]
    filled = np.array([t not in ("", "nan", "None") for t in texts])
    numbers = _numbers(series)
    return bool(filled.any() and np.isfinite(numbers[filled]).all())


def _node_columns(nodes: Any, table: str, columns: Columns, period: str | None) -> dict[str, NodeColumn]:
    if nodes is None:
        return {}
    nodes = _one_period(nodes, table, columns, period)
    found: dict[str, NodeColumn] = {}
    for name in nodes.columns:
        if name in (columns.node, columns.period):
            continue
        if _is_numeric(nodes[name]):
            found[str(name)] = _numbers(nodes[name])
        else:
            found[str(name)] = np.array([str(v) for v in nodes[name]], dtype=np.str_)
    return found


def _dyad_columns(
    dyads: Any, table: str, columns: Columns, period: str | None, positions: dict[str, int], directed: bool
) -> dict[str, Floats]:
    """(N, N) matrices of the numeric columns; pairs that are not listed are nan."""
    if dyads is None:
        return {}
    dyads = _one_period(dyads, table, columns, period)
    _require(dyads, table, columns.origin, columns.destination)
    problems = _Problems()
    origin, destination = _ends(dyads, table, columns, positions, problems)
    twice = pd.Series(origin * len(positions) + destination).duplicated().to_numpy() & (origin >= 0)
    problems.rows(dyads, table, twice, "each ordered pair must be listed once", columns.origin)
    problems.stop_if_any()
    found: dict[str, Floats] = {}
    for name in dyads.columns:
        # The flow itself is never a covariate: a table may serve as flows and as dyads at once.
        keys = (columns.origin, columns.destination, columns.period, columns.flow)
        if name in keys or not _is_numeric(dyads[name]):
            continue
        matrix = np.full((len(positions), len(positions)), np.nan)
        matrix[origin, destination] = _numbers(dyads[name])
        found[str(name)] = matrix if directed else _both_directions(matrix, str(name), table, list(positions))
    return found


def _both_directions(matrix: Floats, name: str, table: str, labels: list[str]) -> Floats:
    """For an undirected network: one value a pair, whichever direction lists it; two that differ are refused."""
    mirrored = np.where(np.isnan(matrix), matrix.T, matrix)
    unequal = ~np.isclose(mirrored, mirrored.T, rtol=1e-9, atol=0.0, equal_nan=True)
    if unequal.any():
        i, j = (int(k) for k in np.argwhere(unequal)[0])
        raise DataError(
            f"{table}, column '{name}': an undirected study needs one value a pair; got {matrix[i, j]:g} for "
            f"{labels[i]} -> {labels[j]} and {matrix[j, i]:g} back ({int(unequal.sum()) // 2} pairs differ)"
        )
    return mirrored
