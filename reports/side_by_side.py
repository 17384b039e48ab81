"""Coefficients of all candidates side by side: terms in rows, candidates in columns, one table a part."""

import math
from collections.abc import Sequence

from steelyard.reports.cells import Cell, Estimate
from steelyard.reports.frames import CandidateRow, EstimateRow
from steelyard.reports.tables import CellKind, Column, Table
from steelyard.reports.wording import label_list

__all__ = ["side_by_side_tables"]

# The first kind that a candidate has is shown; the others stand in its own table.
_PREFERRED = ("node_clustered", "robust", "model")
# Inflation and dispersion stand below the slopes of the law that they belong to.
_GROUPS = (
    ("links", ("links",)),
    ("weights", ("weights", "dispersion")),
    ("joint", ("joint", "inflation", "dispersion")),
)
_CAPTIONS = {
    "links": "Which links exist",
    "weights": "How heavy a given link is",
    "joint": "Links and weights in one law",
}
_Terms = dict[tuple[str, str], EstimateRow]


def side_by_side_tables(
    candidates: Sequence[CandidateRow], estimates: Sequence[EstimateRow]
) -> tuple[Table, ...]:
    """Tables of links, weights and joint parts; node parameters are left out.

    Candidates whose estimates are equal in every term share a column, because they share that part.
    """
    names = [row.candidate for row in candidates]
    names += [name for name in dict.fromkeys(row.candidate for row in estimates) if name not in names]
    # A dispersion belongs to the law of weights where the candidate has one, else to its joint law.
    weighing = {row.candidate for row in estimates if row.part == "weights"}
    known = {part for _, parts in _GROUPS for part in parts}
    others = dict.fromkeys(row.part for row in estimates if row.part not in known)
    tables = []
    for group, parts in (*_GROUPS, *((part, (part,)) for part in others)):
        chosen = [
            row
            for row in estimates
            if row.part in parts
            and not row.is_node
            and (row.part != "dispersion" or (group == "weights") == (row.candidate in weighing))
        ]
        by_candidate = {
            name: _chosen_kind([row for row in chosen if row.candidate == name]) for name in names
        }
        columns = _shared_columns({name: terms for name, terms in by_candidate.items() if terms})
        if columns:
            tables.append(_table(group, columns))
    return tuple(tables)


def _chosen_kind(rows: Sequence[EstimateRow]) -> _Terms:
    """One row a term, under the preferred kind of standard error that the candidate has."""
    present = {row.se_kind for row in rows if not math.isnan(row.se)}
    kind = next((kind for kind in (*_PREFERRED, *sorted(present)) if kind in present), "")
    terms: _Terms = {}
    for row in rows:
        if (row.part, row.term) not in terms or row.se_kind == kind:
            terms[row.part, row.term] = row
    return terms


def _shared_columns(by_candidate: dict[str, _Terms]) -> list[tuple[list[str], _Terms]]:
    columns: list[tuple[list[str], _Terms]] = []
    for name, terms in by_candidate.items():
        same = next((names for names, other in columns if _numbers(other) == _numbers(terms)), None)
        if same is None:
            columns.append(([name], terms))
        else:
            same.append(name)
    return columns


def _numbers(terms: _Terms) -> list[tuple[tuple[str, str], str, str]]:
    """To six digits: a part fitted with another partner differs by rounding at most."""
    return [(key, f"{row.estimate:.6g}", f"{row.se_kind} {row.se:.6g}") for key, row in terms.items()]


def _table(group: str, columns: Sequence[tuple[list[str], _Terms]]) -> Table:
    heads = [
        Column(f"candidate-{number}", " · ".join(names), CellKind.ESTIMATE, 4)
        for number, (names, _) in enumerate(columns, 1)
    ]
    keys = list(dict.fromkeys(key for _, terms in columns for key in terms))
    keys.sort(key=lambda key: key[0] in ("inflation", "dispersion"))
    rows = []
    for part, term in keys:
        label = f"{term} (inflation)" if part == "inflation" else term
        found = [terms.get((part, term)) for _, terms in columns]
        cells: list[Cell] = [Estimate(row.estimate, row.se) if row else None for row in found]
        rows.append((label, *cells))
    caption = f"Estimates: {_CAPTIONS.get(group, group)}"
    head = Column("term", "Term", CellKind.TEXT)
    return Table(f"side-by-side-{group}", caption, (head, *heads), tuple(rows), _notes(columns))


def _notes(columns: Sequence[tuple[list[str], _Terms]]) -> tuple[str, ...]:
    kinds: dict[str, list[str]] = {}
    notes: dict[str, list[str]] = {}
    for names, terms in columns:
        kind = next((row.se_kind for row in terms.values() if row.se_kind), "")
        kinds.setdefault(kind.replace("_", " ") or "none stated", []).extend(names)
        for note in dict.fromkeys(row.note for row in terms.values() if row.note):
            notes.setdefault(note, []).extend(names)
    if len(kinds) == 1:
        said = f"In parentheses: standard error, {next(iter(kinds))}."
    else:
        told = [f"{kind} for {label_list(names)}" for kind, names in kinds.items()]
        said = f"In parentheses: standard error, {'; '.join(told)}."
    return (said, *(f"{_sentence(note)} ({label_list(names, 6)})." for note, names in notes.items()))


def _sentence(text: str) -> str:
    return text[:1].upper() + text[1:]
