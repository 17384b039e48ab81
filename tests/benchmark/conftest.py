"""A small study that runs in about a second."""

from __future__ import annotations

from pathlib import Path

import pytest

from steelyard.benchmark import Study, study_from_text

SMALL = """
title = "small"
seed = 5
[data]
dataset = "islands"
period = 2031
[covariates]
distance = { dyad = "sea_distance", transform = "log" }
[[candidates]]
label = "Poisson"
model = "poisson"
covariates = ["distance"]
[[candidates]]
label = "Logit, lognormal"
links = { model = "logit", covariates = ["distance"] }
weights = { model = "lognormal", covariates = ["distance"] }
[[candidates]]
label = "Degrees, geometric"
links = { model = "configuration" }
weights = { model = "geometric", covariates = ["distance"] }
[[validation]]
scheme = "dyads"
folds = 3
[report]
formats = ["csv"]
"""


@pytest.fixture
def small_text() -> str:
    return SMALL


@pytest.fixture
def small_study(small_text: str) -> Study:
    return study_from_text(small_text, folder=Path(), name="small.toml")
