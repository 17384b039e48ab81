"""Folds to candidates: closed forms by hand."""

import math

import pytest

from steelyard.reports.frames import ScoreRow
from steelyard.reports.pooling import pool_scores


def row(candidate, fold, value, n_dyads=10, score="log_score", better="lower", **changes):
    values = {
        "footing": "counts",
        "candidate": candidate,
        "scheme": "dyads",
        "repeat": 0,
        "fold": fold,
        "score": score,
        "better": better,
        "value": value,
        "n_dyads": n_dyads,
        "n_impossible": 0,
    }
    return ScoreRow(**(values | changes))


def test_mean_scores_are_weighted_by_dyads():
    (pooled,) = pool_scores([row("A", 0, 1.0, 30), row("A", 1, 3.0, 10)])
    assert (pooled.value, pooled.lowest, pooled.highest, pooled.n_folds, pooled.n_dyads) == (1.5, 1, 3, 2, 40)


def test_rmse_is_the_root_of_the_weighted_mean_square():
    # sqrt((30 * 1 + 10 * 25) / 40) = sqrt(7)
    (pooled,) = pool_scores([row("A", 0, 1.0, 30, "rmse"), row("A", 1, 5.0, 10, "rmse")])
    assert pooled.value == pytest.approx(math.sqrt(7), rel=1e-15)


@pytest.mark.parametrize("score", ["log_score", "rmse"])
def test_an_infinite_fold_is_never_averaged_away(score):
    rows = [row("A", 0, 1.0, score=score), row("A", 1, math.inf, 1, score, n_impossible=1)]
    (pooled,) = pool_scores(rows)
    assert pooled.value == math.inf
    assert (pooled.lowest, pooled.highest, pooled.n_impossible) == (1.0, math.inf, 1)


def test_infinite_scores_share_the_last_place():
    pooled = pool_scores([row("A", 0, math.inf), row("B", 0, 2.0), row("C", 0, math.inf), row("D", 0, 1.0)])
    assert [item.rank for item in pooled] == [3, 2, 3, 1]


def test_higher_can_be_better():
    pooled = pool_scores(
        [row("A", 0, 0.7, score="auc", better="higher"), row("B", 0, 0.9, score="auc", better="higher")]
    )
    assert [item.rank for item in pooled] == [2, 1]


def test_a_candidate_without_all_folds_has_a_value_but_no_place():
    rows = [row("A", 0, 2.0), row("A", 1, 2.0), row("B", 0, 1.0)]
    whole, part = pool_scores(rows)
    assert (whole.rank, whole.complete) == (1, True)
    assert (part.value, part.rank, part.n_folds, part.n_folds_expected) == (1.0, None, 1, 2)


@pytest.mark.parametrize("gap", [row("B", 1, math.nan), row("B", 1, 9.0, 0)])
def test_a_fold_without_value_or_dyads_counts_as_lacking(gap):
    pooled = pool_scores([row("A", 0, 2.0), row("A", 1, 2.0), row("B", 0, 1.0), gap])
    assert [item.rank for item in pooled] == [1, None]


def test_folds_of_other_sizes_are_other_dyads():
    assert [item.rank for item in pool_scores([row("A", 0, 2.0, 10), row("B", 0, 1.0, 9)])] == [None, None]


def test_footings_schemes_and_scores_are_ranked_apart():
    rows = [
        row("A", 0, 2.0),
        row("B", 0, 1.0, footing="amounts"),
        row("C", 0, 1.5, scheme="nodes"),
        row("D", 0, 0.5, score="brier"),
    ]
    assert [item.rank for item in pool_scores(rows)] == [1, 1, 1, 1]
