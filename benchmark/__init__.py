"""Studies, cross-validation, criteria, scores and runs.

Names are loaded when they are first used, so that `steelyard --help` does not wait for the numerical libraries.
"""

from __future__ import annotations

import importlib
from types import MappingProxyType
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from steelyard.benchmark.candidates import Candidate
    from steelyard.benchmark.criteria import Criterion, Evidence, ranking
    from steelyard.benchmark.engine import run
    from steelyard.benchmark.errors import FootingError, StudyError
    from steelyard.benchmark.footing import Footing, Scope
    from steelyard.benchmark.results import Results
    from steelyard.benchmark.scores import Better, Score, Summary, Takes, score_registry
    from steelyard.benchmark.splits import DyadFolds, Fold
    from steelyard.benchmark.study import Study, load_study, study_from_text

__all__ = [
    "Better",
    "Candidate",
    "Criterion",
    "DyadFolds",
    "Evidence",
    "Fold",
    "Footing",
    "FootingError",
    "Results",
    "Scope",
    "Score",
    "Study",
    "StudyError",
    "Summary",
    "Takes",
    "load_study",
    "ranking",
    "run",
    "score_registry",
    "study_from_text",
]

_HOMES = MappingProxyType(
    {
        "Better": "scores",
        "Candidate": "candidates",
        "Criterion": "criteria",
        "DyadFolds": "splits",
        "Evidence": "criteria",
        "Fold": "splits",
        "Footing": "footing",
        "FootingError": "errors",
        "Results": "results",
        "Scope": "footing",
        "Score": "scores",
        "Study": "study",
        "StudyError": "errors",
        "Summary": "scores",
        "Takes": "scores",
        "load_study": "study",
        "ranking": "criteria",
        "run": "engine",
        "score_registry": "scores",
        "study_from_text": "study",
    }
)


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(importlib.import_module(f"{__name__}.{_HOMES[name]}"), name)


def __dir__() -> list[str]:
    return list(__all__)
