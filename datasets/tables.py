"""From pandas tables (flows, nodes, dyads) to a FlowNetwork, with every problem named at once."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pandas as pd
from scipy.sparse import csr_array, triu

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.datasets.cells import coded_texts, not_a_number, numbers, texts
from steelyard.datasets.errors import DataError, suggestion
from steelyard.datasets.flows import FlowNetwork, NodeColumn
from steelyard.datasets.provenance import Provenance

__all__ = ["Columns", "network_from_frames"]


@dataclass(frozen=True)
class Columns:
    """Which columns of the user's tables play which part.

    `origin` and `destination` are read in the flows and dyads tables, `flow` in the flows table, `node` in
    the nodes table, `period` (if any) in every table that has it.

    Raises
    ------
    DataError : one column is to play two parts in one table
    """

    origin: str = "origin"
    destination: str = "destination"
    flow: str = "flow"
    node: str = "node"
    period: str | None = None

    def __post_init__(self) -> None:
        for parts in (("origin", "destination", "flow", "period"), ("node", "period")):
            named = [(part, name) for part in parts if (name := getattr(self, part)) is not None]
            for i, (part, name) in enumerate(named):
                for other, same in named[:i]:
                    if name == same:
                        raise DataError(
                            f"columns: {other} and {part} must be two columns of a table; got '{name}' for both"
                        )


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

    Labels of places and periods, and texts, are compared without the spaces around them and in Unicode's
    composed form, so that 'Oslo ' and 'Oslo' are one place. Nothing else about a label is changed: NA, nan and
    1.0 in a table of texts are labels. A missing value of a pandas table is an empty cell.

    Parameters
    ----------
    flows : table with an origin, a destination and a flow column; pairs that are not listed have no flow
    nodes : table keyed by the node column; without it the places are those that the flows name, sorted
    dyads : table keyed by origin and destination. A directed network needs both directions; an undirected one
        takes either. A column of texts, or an undirected one whose two directions differ, is refused when it is
        asked for, so that a study which does not use it can go on
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
    tables = [_tidy(table, name) for table, name in zip((flows, nodes, dyads), names, strict=True)]
    _check_period(tables, names, columns, period)
    flows, nodes, dyads = (
        _one_period(t, name, columns, period) for t, name in zip(tables, names, strict=True)
    )
    problems = _Problems()
    labels = _labels(flows, nodes, columns, names, problems)
    positions = {label: i for i, label in enumerate(labels)}
    place = f"the place must be listed in {names[0] if nodes is None else names[1]}"
    matrix = _flow_matrix(flows, names[0], columns, positions, problems, place)
    dyad_ends = None
    if dyads is not None:
        _require(dyads, names[2], columns.origin, columns.destination)
        dyad_ends = _ends(dyads, names[2], columns, positions, problems, place)
        _refuse_repeated(dyads, names[2], columns, dyad_ends, len(positions), problems)
    problems.stop_if_any()
    provenance = provenance or Provenance(source="not stated")
    if period is not None and columns.period is not None:
        provenance = provenance.after(f"period {period} selected")
    if not directed:
        matrix = csr_array(triu(matrix + matrix.T, 1))
        provenance = provenance.after("the two directions of each pair summed")
    if unit != 1.0:
        provenance = provenance.after(f"amounts divided by the unit {unit:g}")
    dyad_columns, refused = _dyad_columns(dyads, names[2], columns, dyad_ends, labels, directed)
    return FlowNetwork(
        labels=tuple(labels),
        flows=matrix,
        directed=directed,
        unit=float(unit),
        node_columns=_node_columns(nodes, columns),
        dyad_columns=dyad_columns,
        provenance=provenance,
        period=None if period is None else str(period),
        refused_columns=refused,
    )


def _tidy(frame: Any, table: str) -> Any:
    """A table whose columns have distinct text names and whose index counts rows; None stays None."""
    if frame is None:
        return None
    have = [str(name) for name in frame.columns]
    repeated = sorted({name for name in have if have.count(name) > 1})
    if repeated:
        raise DataError(f"{table}: column names must differ; repeated: {', '.join(repeated)}")
    frame = frame.set_axis(have, axis="columns")
    # An index of whole numbers is kept, so that a filtered table still knows the rows of its file.
    return frame if frame.index.dtype.kind == "i" else frame.reset_index(drop=True)


def _require(frame: Any, table: str, *wanted: str) -> None:
    """Refuse a table that lacks a key column, naming the nearest that it has."""
    have = list(frame.columns)
    missing = [w for w in wanted if w not in have]
    if missing:
        raise DataError(
            *(
                f"{table} has no column '{w}'; {suggestion(w, have)} (or name it under columns)"
                for w in missing
            )
        )


def _check_period(
    tables: list[Any], names: tuple[str, str, str], columns: Columns, period: str | None
) -> None:
    """Refuse a period that no table could be searched for, which would otherwise be ignored in silence."""
    if columns.period is None:
        if period is not None:
            raise DataError(
                f"period '{period}' was asked for, but no column holds periods; name it under columns (period)"
            )
        return
    given = [(table, name) for table, name in zip(tables, names, strict=True) if table is not None]
    if not any(columns.period in table.columns for table, _ in given):
        have = {str(column) for table, _ in given for column in table.columns}
        where = ", ".join(name for _, name in given)
        raise DataError(
            f"no column '{columns.period}' for the period in {where}; {suggestion(columns.period, have)}"
        )


def _one_period(frame: Any, table: str, columns: Columns, period: str | None) -> Any:
    """The rows of one period; a table without a period column holds for every period."""
    if frame is None or columns.period is None or columns.period not in frame.columns:
        return frame
    periods = texts(frame[columns.period])
    problems = _Problems()
    problems.rows(frame, table, periods == "", "every row must name its period", columns.period)
    problems.stop_if_any()
    found = sorted(set(periods.tolist()))
    if period is None:
        if len(found) > 1:
            raise DataError(
                f"{table} holds {len(found)} periods ({found[0]} ... {found[-1]}); choose one with period = ..."
            )
        return frame
    if str(period) not in found:
        raise DataError(f"{table} has no period '{period}'; it holds {', '.join(found)}")
    return frame[periods == str(period)]


def _labels(
    flows: Any, nodes: Any, columns: Columns, names: tuple[str, str, str], problems: _Problems
) -> list[str]:
    """The places: the nodes table in its own order, or whatever the flows name, sorted."""
    _require(flows, names[0], columns.origin, columns.destination, columns.flow)
    if nodes is None:
        ends = {label for c in (columns.origin, columns.destination) for label in coded_texts(flows[c])[1]}
        return sorted(ends - {""})
    _require(nodes, names[1], columns.node)
    labels: list[str] = texts(nodes[columns.node]).tolist()
    series = pd.Series(labels, dtype=object)
    empty = (series == "").to_numpy()
    twice = series.duplicated().to_numpy() & ~empty
    problems.rows(nodes, names[1], twice, "each place must be listed once", columns.node)
    problems.rows(nodes, names[1], empty, "a place must have a label", columns.node)
    return labels


def _flow_matrix(
    flows: Any, table: str, columns: Columns, positions: dict[str, int], problems: _Problems, place: str
) -> csr_array:
    """Sparse (N, N) flows, origin in rows; problems are noted, and then the matrix must not be used."""
    ends = _ends(flows, table, columns, positions, problems, place)
    origin, destination = ends
    amount = numbers(flows[columns.flow])
    problems.rows(flows, table, ~np.isfinite(amount), "a flow must be a finite number", columns.flow)
    negative = np.isfinite(amount) & (amount < 0)
    problems.rows(flows, table, negative, "a flow must be >= 0", columns.flow)
    same = (origin >= 0) & (origin == destination) & (amount != 0)
    rule = "a flow from a place to itself is not a dyad; remove the row"
    problems.rows(flows, table, same, rule, columns.origin)
    _refuse_repeated(flows, table, columns, ends, len(positions), problems)
    shape = (len(positions), len(positions))
    if problems.found:
        return csr_array(shape)
    keep = (amount > 0) & (origin != destination)
    return csr_array((amount[keep], (origin[keep], destination[keep])), shape=shape)


def _ends(
    frame: Any, table: str, columns: Columns, positions: dict[str, int], problems: _Problems, place: str
) -> tuple[Integers, Integers]:
    """Positions of both ends of each row; an unknown place is -1 and noted."""
    ends = []
    for column in (columns.origin, columns.destination):
        codes, words = coded_texts(frame[column])
        empty = np.array([word == "" for word in words])[codes]
        index = np.array([positions.get(word, -1) for word in words], dtype=np.int64)[codes]
        index[empty] = -1
        problems.rows(frame, table, empty, "a place must have a label", column)
        problems.rows(frame, table, (index < 0) & ~empty, place, column)
        ends.append(index)
    return ends[0], ends[1]


def _refuse_repeated(
    frame: Any, table: str, columns: Columns, ends: tuple[Integers, Integers], n: int, problems: _Problems
) -> None:
    """Note the rows whose ordered pair of known places an earlier row has."""
    origin, destination = ends
    known = (origin >= 0) & (destination >= 0)
    keys = np.where(known, origin * n + destination, -1 - np.arange(len(origin)))
    twice = pd.Series(keys).duplicated().to_numpy()
    rule = "each ordered pair must be listed once; sum or remove the repeated rows"
    problems.rows(frame, table, twice, rule, columns.origin)


def _node_columns(nodes: Any, columns: Columns) -> dict[str, NodeColumn]:
    if nodes is None:
        return {}
    found: dict[str, NodeColumn] = {}
    for name in nodes.columns:
        if name in (columns.node, columns.period):
            continue
        series = nodes[name]
        values = numbers(series)
        numeric = np.isfinite(values).any() and not not_a_number(series, values).any()
        found[name] = values if numeric else texts(series)
    return found


def _dyad_columns(
    dyads: Any,
    table: str,
    columns: Columns,
    ends: tuple[Integers, Integers] | None,
    labels: list[str],
    directed: bool,
) -> tuple[dict[str, Floats], dict[str, str]]:
    """(N, N) matrices of the numeric columns, nan where a pair is not listed; and why others are refused."""
    found: dict[str, Floats] = {}
    refused: dict[str, str] = {}
    if dyads is None or ends is None:
        return found, refused
    # The flow itself is never a covariate: a table may serve as flows and as dyads at once.
    keys = (columns.origin, columns.destination, columns.period, columns.flow)
    for name in dyads.columns:
        if name in keys:
            continue
        problems = _Problems()
        rule = "a dyad column must hold finite numbers, or nothing where one is missing"
        values = numbers(dyads[name])
        problems.rows(dyads, table, not_a_number(dyads[name], values), rule, name)
        if problems.found or not np.isfinite(values).any():
            refused[name] = (problems.found or [f"{table}, column '{name}' holds no number"])[0]
            continue
        matrix = np.full((len(labels), len(labels)), np.nan)
        matrix[ends] = values
        if not directed:
            matrix = np.where(np.isnan(matrix), matrix.T, matrix)
            if unequal := _unequal_directions(matrix, labels):
                refused[name] = f"{table}, column '{name}': {unequal}"
                continue
        found[name] = matrix
    return found, refused


def _unequal_directions(matrix: Floats, labels: list[str]) -> str:
    """What keeps a matrix from serving an undirected network, which has one value a pair; empty when nothing."""
    size = np.abs(matrix)
    unequal = np.triu(np.abs(matrix - matrix.T) > 1e-9 * np.maximum(size, size.T))
    if not unequal.any():
        return ""
    i, j = (int(k) for k in np.argwhere(unequal)[0])
    return (
        f"an undirected study needs one value a pair; got {matrix[i, j]:.12g} for {labels[i]} -> {labels[j]} and "
        f"{matrix[j, i]:.12g} back ({int(unequal.sum())} pairs differ); make them equal, or study directed flows"
    )
