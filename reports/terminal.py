"""The lines shown in a terminal after a run."""

import textwrap
from collections.abc import Mapping, Sequence

import pandas as pd

from steelyard.reports.cells import CellKind, format_cell
from steelyard.reports.comparing import Comparison, Entry, compare
from steelyard.reports.facts import ReportFacts
from steelyard.reports.frames import read_tables
from steelyard.reports.pooling import pool_scores
from steelyard.reports.readings import warning_table
from steelyard.reports.summary import compared_sentences
from steelyard.reports.wording import count, finding, footing_title, held_out_phrase, listing

__all__ = ["terminal_summary"]

_SHOWN = 4
_WIDTH = 96


def terminal_summary(tables: Mapping[str, pd.DataFrame], facts: ReportFacts) -> str:
    """About ten lines: the rankings of each footing first, then what was compared and what went wrong.

    Parameters
    ----------
    tables : tidy tables by name
    facts : only the title is used

    Returns
    -------
    str, ending with a line end

    Raises
    ------
    ReportError : a table lacks a column or holds what it should not
    """
    run = read_tables(tables)
    pooled = pool_scores(run.scores)
    lines = [" ".join(facts.title.split())]
    for comparison in compare(run, pooled):
        lines += _comparison_lines(comparison)
    lines += compared_sentences(run.candidates)
    warnings = warning_table(run.candidates, run.outcomes, pooled)
    if warnings.rows:
        names = list(dict.fromkeys(str(row[0]) for row in warnings.rows))
        lines.append(f"{count(len(warnings.rows), 'warning')}, see the report: {listing(names, 6)}.")
    wrapped = [textwrap.fill(line, _WIDTH, subsequent_indent="      ") for line in lines]
    return "\n".join(wrapped) + "\n"


def _comparison_lines(comparison: Comparison) -> list[str]:
    lines = [footing_title(comparison.footing)]
    by_aic = comparison.by_aic()
    if by_aic:
        places = [f"{e.aic_rank} {e.candidate} (+{_one(e.aic_delta)})" for e in by_aic]
        lines.append(f"  by AIC, in sample: {_places(places)}")
    if comparison.scheme and comparison.by_held_out():
        places = [f"{e.held_out_rank} {e.candidate} ({_log_score(e)})" for e in comparison.by_held_out()]
        lines.append(f"  by log score, {held_out_phrase(comparison.scheme)}: {_places(places)}")
    if comparison.n_pairs:
        lines.append(f"  {finding(comparison)}.")
    return lines


def _places(places: Sequence[str]) -> str:
    more = f", … {len(places) - _SHOWN} more" if len(places) > _SHOWN else ""
    return ", ".join(places[:_SHOWN]) + more


def _one(value: float) -> str:
    return format_cell(value, CellKind.DECIMAL, 1)


def _log_score(entry: Entry) -> str:
    return format_cell(entry.held_out.value if entry.held_out else None, CellKind.DECIMAL, 4)
