"""Scores: published worked examples, closed forms, and how impossible observations are treated."""

from __future__ import annotations

import numpy as np
import pytest

from steelyard.benchmark import score_registry
from steelyard.benchmark.scores import BRIER, LOG_SCORE, RMSE


def test_brier_worked_example() -> None:
    """Brier (1950), Table 1 (inputs), from memory: two-category score .19, so .095 for one category."""
    forecast = np.array([0.7, 0.9, 0.8, 0.4, 0.2, 0.0, 0.0, 0.0, 0.0, 0.1])
    outcome = np.array([0, 1, 1, 1, 0, 0, 0, 0, 0, 0], dtype=float)
    assert BRIER.summarise(BRIER.values(forecast, outcome)) == pytest.approx(0.095, abs=1e-15)


def test_rmse_closed_form() -> None:
    values = RMSE.values(np.array([1.0, 2.0]), np.array([4.0, 6.0]))
    assert RMSE.summarise(values) == pytest.approx(np.sqrt((9 + 16) / 2))


def test_log_score_is_never_averaged_away() -> None:
    values = LOG_SCORE.values(np.array([-1.0, -np.inf, -2.0]), np.zeros(3))
    assert LOG_SCORE.summarise(values) == np.inf
    assert LOG_SCORE.impossible(values).sum() == 1


def test_no_dyads_is_no_score() -> None:
    assert np.isnan(BRIER.summarise(np.array([])))


def test_registry_offers_the_built_in_scores() -> None:
    found, broken = score_registry().load_all()
    assert set(found) >= {"brier", "log_score", "rmse"}
    assert not broken
    assert all(score.meaning and score.sources for score in found.values())
