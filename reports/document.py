"""A report as a value: every sentence, table and drawing, before any format is chosen."""

from collections.abc import Mapping
from dataclasses import dataclass

import pandas as pd

from steelyard.reports.canvas import Drawing
from steelyard.reports.coefficients import CandidateEstimates, candidate_estimates
from steelyard.reports.comparing import Comparison, compare
from steelyard.reports.facts import ReportFacts
from steelyard.reports.figures import comparison_drawings, figure_key
from steelyard.reports.frames import RunTables, read_tables
from steelyard.reports.pooling import PooledScore, pool_scores
from steelyard.reports.readings import (
    candidate_table,
    criteria_table,
    ranking_table,
    score_table,
    warning_table,
)
from steelyard.reports.summary import caution_sentences, compared_sentences, verdict_sentences
from steelyard.reports.tables import Table
from steelyard.reports.wording import footing_title, held_out_phrase

__all__ = ["ComparisonSection", "Document", "build_document"]


@dataclass(frozen=True)
class ComparisonSection:
    """One footing under one validation scheme: verdict, figures and tables."""

    key: str
    title: str
    held_out: str
    comparison: Comparison
    verdict: tuple[str, ...]
    drawings: tuple[Drawing, ...]
    ranking: Table
    scores: Table | None
    criteria: Table | None


@dataclass(frozen=True)
class Document:
    """All that a report says, in reading order."""

    facts: ReportFacts
    compared: tuple[str, ...]
    sections: tuple[ComparisonSection, ...]
    warnings: Table
    cautions: tuple[str, ...]
    candidates: Table
    estimates: tuple[CandidateEstimates, ...]


def build_document(tables: Mapping[str, pd.DataFrame], facts: ReportFacts) -> Document:
    """Make a report from tidy tables.

    Parameters
    ----------
    tables : tidy tables by name
    facts : title, data, methods, provenance, notes

    Raises
    ------
    ReportError : a table lacks a column or holds what it should not
    """
    run = read_tables(tables)
    pooled = pool_scores(run.scores)
    comparisons = compare(run, pooled)
    keys: list[str] = []
    for comparison in comparisons:
        keys.append(_unlike(figure_key(comparison.footing, comparison.scheme), keys))
    return Document(
        facts=facts,
        compared=compared_sentences(run.candidates),
        sections=tuple(
            _section(run, pooled, comparison, key) for comparison, key in zip(comparisons, keys, strict=True)
        ),
        warnings=warning_table(run.candidates, run.outcomes, pooled),
        cautions=caution_sentences(run, comparisons),
        candidates=candidate_table(run.candidates),
        estimates=candidate_estimates(run.candidates, run.estimates),
    )


def _unlike(key: str, taken: list[str]) -> str:
    """The key, numbered where footings differ only in signs that a file name cannot carry."""
    number = 1
    numbered = key
    while numbered in taken:
        number += 1
        numbered = f"{key}-{number}"
    return numbered


def _section(
    run: RunTables, pooled: tuple[PooledScore, ...], comparison: Comparison, key: str
) -> ComparisonSection:
    has_criteria = any(row.footing == comparison.footing for row in run.criteria)
    return ComparisonSection(
        key=key,
        title=footing_title(comparison.footing),
        held_out=held_out_phrase(comparison.scheme) if comparison.scheme else "",
        comparison=comparison,
        verdict=verdict_sentences(comparison),
        drawings=comparison_drawings(comparison, pooled, key),
        ranking=ranking_table(comparison, key),
        scores=score_table(comparison, pooled, key),
        criteria=criteria_table(run.criteria, comparison.footing, key) if has_criteria else None,
    )
