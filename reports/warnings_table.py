"""The table of what went wrong, was left out, or was held impossible."""

import math
from collections import Counter
from collections.abc import Sequence

from steelyard.reports.facts import ReportFacts
from steelyard.reports.frames import CandidateRow, OutcomeRow
from steelyard.reports.pooling import LOG_SCORE, PooledScore
from steelyard.reports.tables import Cell, CellKind, Column, Missing, Table
from steelyard.reports.wording import count, held_out_phrase, score_title

__all__ = ["warning_table"]

_OUTCOMES = {"failed": "failed", "not_applicable": "not applicable"}
_FULL = ("", "full")


def warning_table(
    candidates: Sequence[CandidateRow],
    outcomes: Sequence[OutcomeRow],
    pooled: Sequence[PooledScore],
    facts: ReportFacts,
) -> Table:
    """Everything that went wrong, was left out, or was held impossible, with counts and reasons."""
    columns = (
        Column("candidate", "Candidate", CellKind.TEXT),
        Column("what", "What", CellKind.TEXT),
        Column("where", "Where", CellKind.TEXT),
        Column("how_many", "How many", CellKind.TEXT),
        Column("reason", "Reason", CellKind.TEXT),
    )
    rows = (*_unconverged(candidates), *_not_scored(outcomes), *_impossible(pooled, facts))
    return Table("warnings", "What failed, was left out, or was held impossible", columns, rows)


def _unconverged(candidates: Sequence[CandidateRow]) -> list[tuple[Cell, ...]]:
    return [
        (row.candidate, "fit not certified", "all dyads", "1 fit", row.message or Missing("no message"))
        for row in candidates
        if row.converged is False
    ]


def _not_scored(outcomes: Sequence[OutcomeRow]) -> list[tuple[Cell, ...]]:
    chosen = [row for row in outcomes if row.outcome in _OUTCOMES]
    groups = Counter((row.candidate, row.outcome, row.scheme, row.reason) for row in chosen)
    totals = Counter((row.candidate, row.scheme) for row in outcomes)
    rows: list[tuple[Cell, ...]] = []
    for (candidate, outcome, scheme, reason), number in groups.items():
        where = "all dyads" if scheme in _FULL else held_out_phrase(scheme)
        total = count(totals[candidate, scheme], "fit" if scheme in _FULL else "fold")
        how_many = f"{number:,} of {total}"
        rows.append((candidate, _OUTCOMES[outcome], where, how_many, reason or Missing("no reason given")))
    return rows


def _impossible(pooled: Sequence[PooledScore], facts: ReportFacts) -> list[tuple[Cell, ...]]:
    """One row for each candidate and number of dyads, however many footings show it."""
    groups: dict[tuple[str, str, int, int], list[str]] = {}
    for item in pooled:
        if item.score == LOG_SCORE and (item.n_impossible or math.isinf(item.value)):
            key = (item.candidate, item.scheme, item.n_impossible, item.n_dyads)
            groups.setdefault(key, []).append(item.footing)
    return [
        (
            candidate,
            "impossible observations",
            "; ".join([held_out_phrase(scheme), *_titles(footings, facts)]),
            f"{number:,} of {count(n_dyads, 'dyad')}",
            f"given no probability, so its {score_title(LOG_SCORE, unit=False)} is infinite",
        )
        for (candidate, scheme, number, n_dyads), footings in groups.items()
    ]


def _titles(footings: Sequence[str], facts: ReportFacts) -> list[str]:
    return [facts.footing(text).title for text in sorted(footings, key=facts.footing_place)]
