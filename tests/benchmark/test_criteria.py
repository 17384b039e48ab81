"""Information criteria: closed forms, ranking, and the refusal of unlike footings."""

from __future__ import annotations

from math import exp, inf, log

import pytest

from steelyard.benchmark import Criterion, Evidence, Footing, FootingError, Scope, ranking
from steelyard.benchmark.criteria import criterion_value
from steelyard.models import Measure

COUNTS = Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "a" * 64)


def evidence(label: str, log_likelihood: float, k: int, n: int = 100, footing: Footing = COUNTS) -> Evidence:
    return Evidence(label, log_likelihood, k, n, footing)


@pytest.mark.parametrize(
    ("criterion", "expected"),
    [
        (Criterion.AIC, 20.0 + 2 * 3),
        (Criterion.AICC, 20.0 + 2 * 3 + 2 * 3 * 4 / (100 - 3 - 1)),  # Hurvich & Tsai (1989)
        (Criterion.BIC, 20.0 + 3 * log(100)),
        (Criterion.HQIC, 20.0 + 2 * 3 * log(log(100))),
    ],
)
def test_closed_forms(criterion: Criterion, expected: float) -> None:
    assert criterion_value(criterion, evidence("a", -10.0, 3)) == pytest.approx(expected, rel=1e-15)


def test_aicc_does_not_exist_with_too_few_dyads() -> None:
    assert criterion_value(Criterion.AICC, evidence("a", -10.0, 99, n=100)) == inf


def test_ranking_orders_and_weighs() -> None:
    rows = ranking(Criterion.AIC, [evidence("worse", -12.0, 3), evidence("best", -10.0, 3)])
    assert [(r.candidate, r.rank, r.delta) for r in rows] == [("best", 1, 0.0), ("worse", 2, 4.0)]
    # Burnham & Anderson (2002): weights are proportional to exp(-delta / 2).
    assert rows[1].weight == pytest.approx(exp(-2) / (1 + exp(-2)))
    assert sum(r.weight for r in rows) == pytest.approx(1.0)


def test_ties_share_a_rank() -> None:
    rows = ranking(Criterion.BIC, [evidence("a", -1.0, 1), evidence("b", -1.0, 1), evidence("c", -2.0, 1)])
    assert [r.rank for r in rows] == [1, 1, 3]


def test_an_impossible_observation_ranks_last_without_nan() -> None:
    rows = ranking(Criterion.AIC, [evidence("no", -inf, 1), evidence("yes", -5.0, 1)])
    assert [(r.candidate, r.value, r.weight) for r in rows] == [("yes", 12.0, 1.0), ("no", inf, 0.0)]


@pytest.mark.parametrize(
    "other",
    [
        Footing(Measure.AMOUNTS, Scope.WHOLE, 1.0, "a" * 64),
        Footing(Measure.COUNTS, Scope.GIVEN_LINKS, 1.0, "a" * 64),
        Footing(Measure.COUNTS, Scope.WHOLE, 10.0, "a" * 64),
        Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "b" * 64),
    ],
    ids=["measure", "scope", "unit", "dyads"],
)
def test_unlike_footings_are_refused(other: Footing) -> None:
    with pytest.raises(FootingError) as caught:
        ranking(Criterion.AIC, [evidence("left", -1.0, 1), evidence("right", -1.0, 1, footing=other)])
    text = str(caught.value)
    assert "'left'" in text
    assert "'right'" in text
    assert other.text in text
    assert "compare" in text


def test_nothing_to_rank() -> None:
    assert ranking(Criterion.AIC, []) == ()
