"""The lines shown in a terminal after a run."""

import textwrap
from collections.abc import Mapping

import pandas as pd

from steelyard.reports.answers import Answer, alone_sentence, answers, short_title
from steelyard.reports.comparing import compare
from steelyard.reports.facts import ReportFacts
from steelyard.reports.frames import read_tables
from steelyard.reports.pooling import pool_scores
from steelyard.reports.summary import compared_sentences, outcome_sentence
from steelyard.reports.verdicts import impossible_overall
from steelyard.reports.warnings_table import warning_table
from steelyard.reports.wording import count

__all__ = ["terminal_summary"]

_WIDTH = 100


def terminal_summary(tables: Mapping[str, pd.DataFrame], facts: ReportFacts) -> str:
    """About ten lines: the verdict first, one line a purpose, then what was compared and what went wrong.

    Parameters
    ----------
    tables : tidy tables by name
    facts : title, and footings in reading order

    Returns
    -------
    str, at most 100 columns wide unless a single word is wider; no line end after the last line

    Raises
    ------
    ReportError : a table lacks a column or holds what it should not
    """
    run = read_tables(tables)
    pooled = pool_scores(run.scores)
    comparisons = compare(run, pooled, facts)
    found = answers(comparisons, pooled)
    several = len({answer.held_out for answer in found if answer.held_out}) > 1
    lines = [" ".join(facts.title.split())]
    lines += [_answer_line(answer, name_scheme=several) for answer in found]
    lines += impossible_overall(comparisons)
    lines.append(alone_sentence(comparisons))
    lines += compared_sentences(run.candidates, run.outcomes)
    warnings = warning_table(run.candidates, run.outcomes, pooled, facts)
    told = f"{count(len(warnings.rows), 'warning')} in the report." if warnings.rows else "No warning."
    lines.append(f"{outcome_sentence(run.outcomes)} {told}".strip())
    return "\n".join(textwrap.fill(line, _WIDTH, subsequent_indent="  ") for line in lines if line)


def _answer_line(answer: Answer, *, name_scheme: bool) -> str:
    title = short_title(answer.title)
    parts = []
    if answer.in_sample:
        parts.append(f"in sample ({answer.in_sample.by}) {answer.in_sample.text}")
    if answer.out_of_sample:
        where = f", {answer.held_out}" if name_scheme else ""
        parts.append(f"out of sample ({answer.out_of_sample.by}{where}) {answer.out_of_sample.text}")
    if answer.in_sample and answer.out_of_sample:
        parts.append(answer.agreement)
    return f"{title[:1].lower()}{title[1:]}: {'; '.join(parts) or 'nothing is ranked'}"
