"""Footings of one law: the parts add up to the whole, and amounts reach counts through cells."""

from __future__ import annotations

import numpy as np
import pytest

from steelyard.benchmark import Scope
from steelyard.benchmark.evaluation import log_densities, score_rows
from steelyard.benchmark.scores import BRIER, LOG_SCORE, RMSE
from steelyard.models import Measure, Part, TwoPart, model_registry
from steelyard.models.checks import EXAMPLE_COVARIATES, ExampleFlows
from steelyard.models.distributions import HurdleLaw, LinkLaw, LognormalLinkLaw

REGISTRY = model_registry()


def model(name: str):
    kind = REGISTRY.get(name)
    return kind() if kind.requires.covariates.value == "none" else kind(covariates=EXAMPLE_COVARIATES)


JOINT = [
    model("poisson"),
    model("negative_binomial"),
    TwoPart(model("logit"), model("lognormal")),
    TwoPart(model("configuration"), model("geometric")),
]


@pytest.mark.parametrize("candidate", JOINT, ids=lambda m: m.name)
def test_parts_add_up_to_the_whole(candidate) -> None:
    dyads = ExampleFlows(directed=True).dyads
    law = candidate.fit(dyads).distribution(dyads)
    found = {
        (d.footing.measure, d.footing.scope): d.values for d in log_densities(law, Part.JOINT, dyads, dyads)
    }
    links = found[Measure.LINKS, Scope.WHOLE]
    assert len(links) == len(dyads)
    for measure in (Measure.COUNTS, Measure.AMOUNTS):
        if (measure, Scope.WHOLE) in found:
            given = found[measure, Scope.GIVEN_LINKS]
            assert len(given) == dyads.n_links
            total = links.sum() + given.sum()
            assert total == pytest.approx(found[measure, Scope.WHOLE].sum(), rel=1e-12)
    assert (Measure.COUNTS, Scope.WHOLE) in found  # every whole law reaches the counts footing


def test_cells_of_amounts_are_probabilities_of_counts() -> None:
    """A narrow unit makes cells thin: probability of a cell is then its width (1) times the density."""
    dyads = ExampleFlows(directed=True, unit=0.001).dyads
    law = JOINT[2].fit(dyads).distribution(dyads)
    found = {
        (d.footing.measure, d.footing.scope): d.values for d in log_densities(law, Part.JOINT, dyads, dyads)
    }
    counts, amounts = found[Measure.COUNTS, Scope.WHOLE], found[Measure.AMOUNTS, Scope.WHOLE]
    assert np.allclose(counts, amounts, atol=1e-5)


def test_impossible_link_spoils_links_but_not_the_weight_given_it() -> None:
    dyads = ExampleFlows(directed=True).dyads
    n = len(dyads)
    law = HurdleLaw(LinkLaw.from_log_odds(np.full(n, -np.inf)), LognormalLinkLaw(np.zeros(n), np.ones(n)))
    found = {
        (d.footing.measure, d.footing.scope): d.values for d in log_densities(law, Part.JOINT, dyads, dyads)
    }
    assert np.isneginf(found[Measure.LINKS, Scope.WHOLE]).sum() == dyads.n_links
    assert np.isneginf(found[Measure.COUNTS, Scope.WHOLE]).sum() == dyads.n_links
    assert np.isfinite(found[Measure.COUNTS, Scope.GIVEN_LINKS]).all()
    assert np.isfinite(found[Measure.AMOUNTS, Scope.GIVEN_LINKS]).all()
    rows = score_rows_of(law, dyads)
    assert rows["links", "log_score"].n_impossible == dyads.n_links
    assert rows["links", "log_score"].value == np.inf


class Fixed:
    """A fitted law that answers with one distribution."""

    def __init__(self, law):
        self.law = law

    def distribution(self, dyads):
        return self.law

    def expected_weight(self, dyads):
        return self.law.mean


def score_rows_of(law, dyads):
    rows = score_rows(Fixed(law), Part.JOINT, law.measure, dyads, dyads, [LOG_SCORE, BRIER, RMSE])
    return {(row.footing.split(" · ")[0], row.score): row for row in rows}


def test_scores_against_literal_sums() -> None:
    dyads = ExampleFlows(directed=True).dyads
    law = JOINT[0].fit(dyads).distribution(dyads)
    rows = score_rows_of(law, dyads)
    assert rows["counts", "log_score"].value == pytest.approx(-law.log_density(dyads.counts).mean())
    assert rows["links", "brier"].value == pytest.approx(((law.link_probability - dyads.links) ** 2).mean())
    assert rows["expected flows", "rmse"].value == pytest.approx(
        np.sqrt(((law.mean - dyads.weights) ** 2).mean())
    )
    assert rows["counts given links", "log_score"].n_dyads == dyads.n_links


def test_one_part_models_stand_on_their_own_footing_only() -> None:
    dyads = ExampleFlows(directed=True).dyads
    links, weights = model("logit"), model("geometric")
    law = links.fit(dyads).distribution(dyads)
    assert [d.footing.measure for d in log_densities(law, Part.LINKS, dyads, dyads)] == [Measure.LINKS]
    law = weights.fit(dyads).distribution(dyads)
    (only,) = log_densities(law, Part.WEIGHTS, dyads, dyads)
    assert (only.footing.measure, only.footing.scope) == (Measure.COUNTS, Scope.GIVEN_LINKS)
    rows = score_rows(
        weights.fit(dyads), Part.WEIGHTS, Measure.COUNTS, dyads, dyads, [LOG_SCORE, BRIER, RMSE]
    )
    assert [row.score for row in rows] == ["log_score"]
