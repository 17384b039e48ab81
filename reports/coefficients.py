"""Reading tables of estimates: one per candidate, node parameters apart."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.reports.frames import CandidateRow, EstimateRow
from steelyard.reports.tables import Cell, CellKind, Column, Table
from steelyard.reports.wording import count

__all__ = ["CandidateEstimates", "candidate_estimates"]

NODE_ROWS = 400
_KINDS = ("model", "robust", "node_clustered", "jackknife")
_NOTE = (
    "Standard errors: model, from the inverse observed information; robust, HC1; node clustered, allowing "
    "any dependence between dyads that share a node. Intervals stand in tables/estimates.csv."
)


@dataclass(frozen=True)
class CandidateEstimates:
    """Estimates of one candidate: its coefficients, and its node parameters with a sentence about them."""

    candidate: str
    coefficients: Table | None
    nodes: Table | None
    node_sentence: str


def candidate_estimates(
    candidates: Sequence[CandidateRow], estimates: Sequence[EstimateRow]
) -> tuple[CandidateEstimates, ...]:
    """Reading tables of all candidates that have estimates, in the order of `candidates`."""
    groups: dict[str, list[EstimateRow]] = {row.candidate: [] for row in candidates}
    for row in estimates:
        groups.setdefault(row.candidate, []).append(row)
    return tuple(
        _estimates(name, rows, index) for index, (name, rows) in enumerate(groups.items(), 1) if rows
    )


def _estimates(candidate: str, rows: Sequence[EstimateRow], number: int) -> CandidateEstimates:
    terms = [row for row in rows if not row.is_node]
    nodes = [row for row in rows if row.is_node]
    caption = f"Coefficients of {candidate}"
    coefficients = _table(f"estimates-{number}", caption, terms, (_NOTE,)) if terms else None
    if not nodes:
        return CandidateEstimates(candidate, coefficients, None, "")
    unique = {(row.part, row.term): row.estimate for row in nodes}
    boundary = sum(math.isinf(value) for value in unique.values())
    sentence = count(len(unique), "node parameter")
    sentence += f", {boundary:,} of them at the boundary" if boundary else ""
    kept = set(list(unique)[:NODE_ROWS])
    notes = ("The first of them; all stand in tables/estimates.csv.",) if len(unique) > len(kept) else ()
    shown = [row for row in nodes if (row.part, row.term) in kept]
    table = _table(f"nodes-{number}", f"Node parameters of {candidate}", shown, notes)
    return CandidateEstimates(candidate, coefficients, table, sentence)


def _table(name: str, caption: str, rows: Sequence[EstimateRow], notes: tuple[str, ...]) -> Table:
    """One line per part and term; standard error and p-value of every kind side by side."""
    present = {row.se_kind for row in rows if row.se_kind}
    kinds = [kind for kind in _KINDS if kind in present] + sorted(present - set(_KINDS))
    columns = [
        Column("term", "Term", CellKind.TEXT),
        Column("part", "Part", CellKind.TEXT),
        Column("estimate", "Estimate", CellKind.SIGNIFICANT, 4),
    ]
    for kind in kinds:
        words = kind.replace("_", " ")
        columns += [
            Column(f"{kind}_se", f"SE, {words}", CellKind.SIGNIFICANT, 3),
            Column(f"{kind}_p", f"p, {words}", CellKind.P_VALUE, 3),
        ]
    remarks, shared = _remarks(rows)
    if shared:
        notes = (f"All rows: {shared}.", *notes)
    noted = any(remarks.values())
    if noted:
        columns.append(Column("note", "Note", CellKind.TEXT))
    by_kind = {(row.part, row.term, row.se_kind): row for row in rows}
    first = {(row.part, row.term): row for row in reversed(rows)}
    lines: list[tuple[Cell, ...]] = []
    for part, term in dict.fromkeys((row.part, row.term) for row in rows):
        cells: list[Cell] = [term, part, first[part, term].estimate]
        for kind in kinds:
            row = by_kind.get((part, term, kind))
            cells += [row.se, row.p_value] if row else [None, None]
        if noted:
            cells.append(remarks[part, term])
        lines.append(tuple(cells))
    return Table(name, caption, tuple(columns), tuple(lines), notes)


def _remarks(rows: Sequence[EstimateRow]) -> tuple[dict[tuple[str, str], str], str]:
    """The remark on each part and term, and apart from them the one that all of several share."""
    found: dict[tuple[str, str], dict[str, None]] = {(row.part, row.term): {} for row in rows}
    for row in rows:
        found[row.part, row.term] |= {row.note: None} if row.note else {}
    texts = {key: "; ".join(notes) for key, notes in found.items()}
    said = set(texts.values())
    if len(texts) > 1 and len(said) == 1:
        return dict.fromkeys(texts, ""), said.pop()
    return texts, ""
