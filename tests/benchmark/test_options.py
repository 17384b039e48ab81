"""Options that change what a candidate declares, from the study file to the tables."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from steelyard.benchmark import Results, StudyError, run, study_from_text

STUDY = """
title = "options"
seed = 5
[data]
dataset = "islands"
directed = DIRECTED
[covariates]
size = { node = "throughput", end = "both", transform = "log" }
distance = { dyad = "sea_distance", transform = "log" }
[specifications]
gravity = ["size", "distance"]
[[candidates]]
label = "plain"
model = "poisson"
covariates = "gravity"
[[candidates]]
label = "effects"
model = "poisson"
covariates = "gravity"
origin_effects = true
destination_effects = true
[[candidates]]
label = "nodes"
model = "poisson"
covariates = "gravity"
node_effects = true
[[candidates]]
label = "amounts"
model = "poisson"
covariates = "gravity"
node_effects = true
amounts = true
[[validation]]
scheme = "dyads"
folds = 3
[report]
formats = ["html", "csv"]
"""


def results(directed: bool) -> Results:
    text = STUDY.replace("DIRECTED", str(directed).lower())
    return run(study_from_text(text, folder=Path(), name="options.toml"), jobs=1, progress=False)


@pytest.fixture(scope="module")
def directed() -> Results:
    return results(True)


def test_effects_are_told_strengths_and_count_their_rank(directed: Results) -> None:
    rows = directed.candidates.set_index("candidate")
    n = rows["n_nodes"].iloc[0]
    assert rows["converged"].all()
    assert (rows["residual"] <= 1e-8).all()
    assert rows["information"].tolist() == ["covariates", "strengths", "strengths", "strengths"]
    # The sum of two node values is contained in the effects; the distance is not.
    assert rows["n_parameters"].tolist() == [3, 2 * n - 1 + 1, n + 1, n + 1]
    assert rows.loc["effects", "log_likelihood"] >= rows.loc["nodes", "log_likelihood"]
    assert rows.loc["nodes", "log_likelihood"] > rows.loc["plain", "log_likelihood"]
    notes = directed.estimates.query("candidate == 'effects' and term == 'size'")["note"]
    assert notes.tolist() == ["set aside: the effects already contain it"]


def test_a_mean_has_no_log_score_and_no_criteria_and_says_so(directed: Results) -> None:
    row = directed.candidates.set_index("candidate").loc["amounts"]
    assert row["measure"] == "none (mean only)"
    assert np.isnan(row["log_likelihood"])
    assert "no log-likelihood, no criteria and no log score" in row["message"]
    assert "amounts" not in set(directed.criteria["candidate"])
    assert set(directed.scores.query("candidate == 'amounts'")["score"]) == {"rmse"}
    assert {"log_score", "brier", "rmse"} <= set(directed.scores.query("candidate == 'effects'")["score"])
    assert set(directed.outcomes["outcome"]) == {"scored"}


def test_origin_effects_are_refused_on_undirected_networks_with_the_way_out() -> None:
    outcomes = results(False).outcomes.set_index("candidate")
    refused = outcomes.loc["effects"]
    assert set(refused["outcome"]) == {"not_applicable"}
    assert refused["reason"].str.contains("use node_effects = true there").all()
    assert set(outcomes.drop("effects")["outcome"]) == {"scored"}


def test_options_that_exclude_each_other_are_refused_when_the_study_is_read() -> None:
    text = STUDY.replace("DIRECTED", "true").replace("amounts = true", "origin_effects = true")
    with pytest.raises(StudyError, match="give either node_effects or origin_effects"):
        study_from_text(text, folder=Path(), name="options.toml")


def test_an_option_of_another_type_is_refused() -> None:
    text = STUDY.replace("DIRECTED", "true").replace("amounts = true", "amounts = 1")
    with pytest.raises(StudyError, match="the option 'amounts' should be a valid boolean; got 1"):
        study_from_text(text, folder=Path(), name="options.toml")
