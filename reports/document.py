"""A report as a value: every sentence, table and drawing, before any format is chosen."""

from collections.abc import Mapping
from dataclasses import dataclass

import pandas as pd

from steelyard.reports.answers import Answer, alone_sentence, answers
from steelyard.reports.canvas import Drawing
from steelyard.reports.coefficients import CandidateEstimates, candidate_estimates
from steelyard.reports.comparing import Comparison, compare
from steelyard.reports.facts import ReportFacts
from steelyard.reports.figures import comparison_drawings, figure_key
from steelyard.reports.frames import RunTables, read_tables
from steelyard.reports.pooling import PooledScore, pool_scores
from steelyard.reports.readings import candidate_table, criteria_table, ranking_table, score_table
from steelyard.reports.side_by_side import side_by_side_tables
from steelyard.reports.specification import specification_tables
from steelyard.reports.summary import caution_sentences, compared_sentences, outcome_sentence
from steelyard.reports.tables import Table
from steelyard.reports.verdicts import verdict_sentences
from steelyard.reports.warnings_table import warning_table
from steelyard.reports.wording import held_out_phrase, score_title

__all__ = ["ComparisonSection", "Document", "build_document"]


@dataclass(frozen=True)
class ComparisonSection:
    """One footing under one validation scheme: verdict, figures and tables."""

    key: str
    title: str
    held_out: str
    score: str
    comparison: Comparison
    verdict: tuple[str, ...]
    drawings: tuple[Drawing, ...]
    ranking: Table
    scores: Table | None
    criteria: Table | None


@dataclass(frozen=True)
class Document:
    """All that a report says, in reading order.

    `answers` are those of the sections in which two or more candidates stand, with each section's key;
    `alone` tells of the others. `outcome` counts the fits and folds.
    """

    facts: ReportFacts
    compared: tuple[str, ...]
    answers: tuple[tuple[str, Answer], ...]
    alone: str
    sections: tuple[ComparisonSection, ...]
    warnings: Table
    outcome: str
    cautions: tuple[str, ...]
    candidates: Table
    side_by_side: tuple[Table, ...]
    estimates: tuple[CandidateEstimates, ...]
    tests: tuple[Table, ...]


def build_document(tables: Mapping[str, pd.DataFrame], facts: ReportFacts) -> Document:
    """Make a report from tidy tables.

    Parameters
    ----------
    tables : tidy tables by name
    facts : title, data, methods, provenance, notes, footings in reading order

    Raises
    ------
    ReportError : a table lacks a column or holds what it should not
    """
    run = read_tables(tables)
    pooled = pool_scores(run.scores)
    comparisons = compare(run, pooled, facts)
    keys: list[str] = []
    for comparison in comparisons:
        keys.append(_unlike(figure_key(comparison.sheet.title, comparison.scheme), keys))
    ranked = [key for key, comparison in zip(keys, comparisons, strict=True) if not comparison.is_alone]
    return Document(
        facts=facts,
        compared=compared_sentences(run.candidates, run.outcomes),
        answers=tuple(zip(ranked, answers(comparisons, pooled), strict=True)),
        alone=alone_sentence(comparisons),
        sections=tuple(
            _section(run, pooled, comparison, key) for comparison, key in zip(comparisons, keys, strict=True)
        ),
        warnings=warning_table(run.candidates, run.outcomes, pooled, facts),
        outcome=outcome_sentence(run.outcomes),
        cautions=caution_sentences(run, comparisons),
        candidates=candidate_table(run.candidates, facts),
        side_by_side=side_by_side_tables(run.candidates, run.estimates),
        estimates=candidate_estimates(run.candidates, run.estimates),
        tests=specification_tables(run.candidates, run.tests),
    )


def _unlike(key: str, taken: list[str]) -> str:
    """The key, numbered where titles differ only in signs that a file name cannot carry."""
    number = 1
    numbered = key
    while numbered in taken:
        number += 1
        numbered = f"{key}-{number}"
    return numbered


def _section(
    run: RunTables, pooled: tuple[PooledScore, ...], comparison: Comparison, key: str
) -> ComparisonSection:
    has_criteria = comparison.has_criteria and not comparison.is_alone
    return ComparisonSection(
        key=key,
        title=comparison.sheet.title,
        held_out=held_out_phrase(comparison.scheme) if comparison.scheme else "",
        score=score_title(comparison.score, unit=False),
        comparison=comparison,
        verdict=verdict_sentences(comparison, pooled),
        drawings=comparison_drawings(comparison, pooled, key),
        ranking=ranking_table(comparison, key),
        scores=score_table(comparison, pooled, key),
        criteria=criteria_table(run.criteria, comparison.sheet, key) if has_criteria else None,
    )
