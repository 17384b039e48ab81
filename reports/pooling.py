"""Scores of folds to one score per candidate, without averaging anything away."""

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, replace

from steelyard.reports.frames import ScoreRow

__all__ = ["BRIER", "LOG_SCORE", "RMSE", "PooledScore", "pool_scores"]

LOG_SCORE = "log_score"
BRIER = "brier"
RMSE = "rmse"
# Candidates that share a part score alike but for rounding; closer than this is a tie.
_TIE = 1e-12


@dataclass(frozen=True)
class PooledScore:
    """One score of one candidate over all folds of one scheme, on one footing.

    `value` is the mean over all held-out dyads; `lowest` and `highest` are the extreme folds, which say how
    folds differ and nothing about a standard error. `rank` is None where the candidate lacks folds that
    others have (`complete` is False), because its mean then covers other dyads than theirs.
    """

    footing: str
    candidate: str
    scheme: str
    score: str
    better: str
    value: float
    lowest: float
    highest: float
    n_folds: int
    n_folds_expected: int
    n_dyads: int
    n_impossible: int
    complete: bool
    rank: int | None = None


def pool_scores(rows: Sequence[ScoreRow]) -> tuple[PooledScore, ...]:
    """Pool fold scores and rank candidates within each footing, scheme and score.

    A mean score pools as sum(value n_dyads) / sum(n_dyads), `rmse` as the root of the mean square over the
    same dyads. An infinite fold makes the pooled score infinite. Candidates keep the order of the rows.

    Parameters
    ----------
    rows : fold scores; folds without dyads or without a value are left out

    Returns
    -------
    tuple of pooled scores, grouped by (footing, scheme, score) in the order these first appear
    """
    groups: dict[tuple[str, str, str], dict[str, list[ScoreRow]]] = defaultdict(lambda: defaultdict(list))
    for row in rows:
        group = groups[row.footing, row.scheme, row.score][row.candidate]
        if row.n_dyads and not math.isnan(row.value):
            group.append(row)
    pooled: list[PooledScore] = []
    for candidates in groups.values():
        pooled += _ranked(_pool_group([folds for folds in candidates.values() if folds]))
    return tuple(pooled)


def _pool_group(candidates: list[list[ScoreRow]]) -> list[PooledScore]:
    """Pool each candidate of one (footing, scheme, score); the union of all folds is expected of each."""
    expected = {_fold_key(row) for folds in candidates for row in folds}
    n_expected = len({key[:2] for key in expected})
    return [_pool(folds, n_expected, {_fold_key(row) for row in folds} == expected) for folds in candidates]


def _fold_key(row: ScoreRow) -> tuple[int | None, int | None, int | None]:
    return (row.repeat, row.fold, row.n_dyads)


def _pool(folds: list[ScoreRow], n_expected: int, complete: bool) -> PooledScore:
    first = folds[0]
    values = [row.value for row in folds]
    sizes = [row.n_dyads or 0 for row in folds]
    if first.score == RMSE:
        value = math.sqrt(_weighted_mean([item**2 for item in values], sizes))
    else:
        value = _weighted_mean(values, sizes)
    return PooledScore(
        footing=first.footing,
        candidate=first.candidate,
        scheme=first.scheme,
        score=first.score,
        better=first.better,
        value=value,
        lowest=min(values),
        highest=max(values),
        n_folds=len(folds),
        n_folds_expected=n_expected,
        n_dyads=sum(sizes),
        n_impossible=sum(row.n_impossible or 0 for row in folds),
        complete=complete,
    )


def _weighted_mean(values: list[float], sizes: list[int]) -> float:
    """Mean over dyads; infinite as soon as one fold is, undefined when folds are infinite both ways."""
    if any(map(math.isinf, values)):
        return sum(value for value in values if math.isinf(value))
    return math.fsum(value * size for value, size in zip(values, sizes, strict=True)) / sum(sizes)


def _ranked(pooled: list[PooledScore]) -> list[PooledScore]:
    """Rank complete candidates, scores equal to 1e-12 (infinities among them) sharing the better place."""
    keys = [
        (item.value if item.better != "higher" else -item.value)
        for item in pooled
        if item.complete and not math.isnan(item.value)
    ]
    ranked = []
    for item in pooled:
        if item.complete and not math.isnan(item.value):
            key = item.value if item.better != "higher" else -item.value
            item = replace(item, rank=1 + sum(_is_less(other, key) for other in keys))
        ranked.append(item)
    return ranked


def _is_less(one: float, two: float) -> bool:
    if math.isinf(one) or math.isinf(two):
        return one < two
    return one < two - _TIE * max(abs(one), abs(two))
