"""From task results to the tidy tables, in an order that does not depend on who finished first."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import pandas as pd

from steelyard.benchmark.criteria import Criterion, Evidence, ranking
from steelyard.benchmark.footing import Footing
from steelyard.benchmark.tasks import Task, TaskResult

__all__ = ["COLUMNS", "assemble"]

COLUMNS: Mapping[str, tuple[str, ...]] = {
    "candidates": (
        "candidate",
        "family",
        "links",
        "weights",
        "information",
        "measure",
        "footing",
        "n_nodes",
        "n_dyads",
        "n_links",
        "n_parameters",
        "log_likelihood",
        "log_likelihood_links",
        "log_likelihood_weights",
        "converged",
        "iterations",
        "residual",
        "message",
    ),
    "criteria": ("footing", "candidate", "criterion", "value", "delta", "weight", "rank"),
    "estimates": (
        "candidate",
        "part",
        "term",
        "estimate",
        "se_kind",
        "se",
        "z",
        "p_value",
        "lower",
        "upper",
        "note",
    ),
    "scores": (
        "footing",
        "candidate",
        "scheme",
        "repeat",
        "fold",
        "score",
        "better",
        "value",
        "n_dyads",
        "n_impossible",
    ),
    "tests": ("candidate", "test", "against", "statistic", "p_value", "note"),
    "outcomes": ("candidate", "scheme", "repeat", "fold", "outcome", "reason"),
}
Finished = Sequence[tuple[Task, TaskResult]]


def assemble(
    finished: Finished, pairs: Mapping[tuple[str, str], TaskResult], footings: Mapping[str, Footing]
) -> dict[str, Any]:
    """The tidy tables as DataFrames.

    Parameters
    ----------
    finished : tasks with their results, in the order of the study
    pairs : tests of two candidates, by their labels in the order of the study
    footings : text -> footing, for every footing that the evidence names
    """
    rows = {
        "candidates": list(_candidates(finished)),
        "criteria": list(_criteria(finished, footings)),
        "estimates": list(_estimates(finished)),
        "scores": list(_scores(finished)),
        "tests": list(_tests(finished, pairs)),
        "outcomes": list(_outcomes(finished)),
    }
    return {name: pd.DataFrame(rows[name], columns=list(columns)) for name, columns in COLUMNS.items()}


def _full(finished: Finished) -> Iterator[tuple[str, Mapping[str, Any]]]:
    for task, result in finished:
        if task.fold is None and result.payload:
            yield task.candidate.label, result.payload


def _candidates(finished: Finished) -> Iterator[dict[str, Any]]:
    for label, payload in _full(finished):
        yield {"candidate": label, **payload["candidates"]}


def _estimates(finished: Finished) -> Iterator[dict[str, Any]]:
    for label, payload in _full(finished):
        for row in payload["estimates"]:
            yield {"candidate": label, **row}


def _criteria(finished: Finished, footings: Mapping[str, Footing]) -> Iterator[dict[str, Any]]:
    """Rankings within each footing, from certified fits only: an uncertified fit is no maximum."""
    by_footing: dict[str, list[Evidence]] = {}
    for label, payload in _full(finished):
        for e in payload["evidence"]:
            if e["criteria"] and payload["candidates"]["converged"]:
                footing = footings[e["footing"]]
                entry = Evidence(label, e["log_likelihood"], e["n_parameters"], e["n_dyads"], footing)
                by_footing.setdefault(e["footing"], []).append(entry)
    for text in sorted(by_footing):
        for criterion in Criterion:
            for row in ranking(criterion, by_footing[text]):
                yield {
                    "footing": text,
                    "candidate": row.candidate,
                    "criterion": criterion.value,
                    "value": row.value,
                    "delta": row.delta,
                    "weight": row.weight,
                    "rank": row.rank,
                }


def _scores(finished: Finished) -> Iterator[dict[str, Any]]:
    for task, result in finished:
        if task.fold is None:
            continue
        for row in result.payload.get("scores", []):
            where = {"scheme": task.scheme, "repeat": task.fold.repeat, "fold": task.fold.fold}
            yield {"candidate": task.candidate.label, **where, **row}


def _tests(finished: Finished, pairs: Mapping[tuple[str, str], TaskResult]) -> Iterator[dict[str, Any]]:
    """For each candidate the tests of its own, then those against each other candidate."""
    fitted = dict(_full(finished))
    for label in dict.fromkeys(task.candidate.label for task, _ in finished):
        for row in fitted[label]["tests"] if label in fitted else []:
            yield {"candidate": label, **row}
        for labels, result in pairs.items():
            for row in result.payload["tests"] if label in labels else []:
                if labels[row["side"]] == label:
                    other = labels[1 - row["side"]]
                    against = f"{other}; {row['against']}" if row["against"] else other
                    yield {"candidate": label, **row, "against": against}


def _outcomes(finished: Finished) -> Iterator[dict[str, Any]]:
    """One row a task; the fit to all dyads has the scheme 'full' and counts as repeat and fold 0."""
    for task, result in finished:
        yield {
            "candidate": task.candidate.label,
            "scheme": task.scheme,
            "repeat": 0 if task.fold is None else task.fold.repeat,
            "fold": 0 if task.fold is None else task.fold.fold,
            "outcome": result.outcome.outcome,
            "reason": result.outcome.reason,
        }
