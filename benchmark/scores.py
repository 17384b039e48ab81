"""Scores: a value for each dyad, with a declared direction. What is scored is a law or its mean, never a model."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from enum import Enum
from functools import partial

import numpy as np

from steelyard.datasets import Bools, Entry, Floats, RegistrationError, Registry

__all__ = ["BRIER", "LOG_SCORE", "RMSE", "Better", "Score", "Summary", "Takes", "score_registry"]


class Better(Enum):
    """Which way a score points."""

    LOWER = "lower"
    HIGHER = "higher"


class Takes(Enum):
    """What a rule is given: the law's log density, its link probability, or the expected flow alone."""

    LOG_DENSITY = "log density of what was observed"
    LINK_PROBABILITY = "link probability"
    EXPECTED_FLOW = "expected flow"


class Summary(Enum):
    """How values of single dyads become one number."""

    MEAN = "mean"
    ROOT_MEAN = "root of the mean"


@dataclass(frozen=True)
class Score:
    """A scoring rule.

    Attributes
    ----------
    name : as tables show it
    better : its direction
    takes : what its first argument is
    summary : how dyad values are brought together
    values : (prediction, observation) -> (n,) values; for LINK_PROBABILITY the observation is 0 or 1, else the
        flow in units
    meaning, sources : for the reader
    """

    name: str
    better: Better
    takes: Takes
    summary: Summary
    values: Callable[[Floats, Floats], Floats]
    meaning: str
    sources: str

    def summarise(self, values: Floats) -> float:
        """One number for all dyads; infinite as soon as one value is, nan when there is none."""
        if not len(values):
            return float("nan")
        mean = float(np.mean(values))
        return float(np.sqrt(mean)) if self.summary is Summary.ROOT_MEAN else mean

    def impossible(self, values: Floats) -> Bools:
        """(n,) True where the law called the observation impossible."""
        return np.isinf(values)


def _minus(log_density: Floats, _: Floats) -> Floats:
    return -log_density


def _squared_difference(predicted: Floats, observed: Floats) -> Floats:
    return np.asarray((predicted - observed) ** 2)


LOG_SCORE = Score(
    "log_score",
    Better.LOWER,
    Takes.LOG_DENSITY,
    Summary.MEAN,
    _minus,
    "mean of minus the log probability (or density) of what was observed; infinite when it was called impossible",
    "Good (1952); Gneiting & Raftery (2007)",
)
BRIER = Score(
    "brier",
    Better.LOWER,
    Takes.LINK_PROBABILITY,
    Summary.MEAN,
    _squared_difference,
    "mean squared difference between link probability and link (0 or 1), one category",
    "Brier (1950); Gneiting & Raftery (2007)",
)
RMSE = Score(
    "rmse",
    Better.LOWER,
    Takes.EXPECTED_FLOW,
    Summary.ROOT_MEAN,
    _squared_difference,
    "root mean squared difference between expected and observed flow, in units; ruled by the largest flows",
    "common practice, no source",
)
BUILT_IN: Mapping[str, Score] = {score.name: score for score in (LOG_SCORE, BRIER, RMSE)}


def score_registry() -> Registry[Score]:
    """Built-in scores and those that installed packages offer under `steelyard.scores`."""
    entries = {name: Entry("built in", partial(_itself, score)) for name, score in BUILT_IN.items()}
    registry: Registry[Score] = Registry("score", _checked, entries)
    return registry.with_entry_points("steelyard.scores")


def _itself(score: Score) -> Score:
    return score


def _checked(name: str, candidate: object) -> Score:
    if not isinstance(candidate, Score) or candidate.name != name:
        raise RegistrationError(
            f"a score must be a steelyard.benchmark.Score named '{name}'; got {candidate!r}"
        )
    return candidate
