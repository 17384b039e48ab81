"""TwoPart: the joint law is the product of its parts, and wrong parts are refused."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
import pytest

from steelyard.datasets import (
    DyadCovariate,
    Dyads,
    End,
    NodeCovariate,
    Transform,
    dataset_registry,
)
from steelyard.models import Family, Holdout, Information, Measure, Model, Need, Part, TwoPart
from steelyard.models.compose import FittedTwoPart
from steelyard.models.contract import Convergence
from steelyard.models.econometric.logit import LogitModel
from steelyard.models.econometric.lognormal import LognormalModel
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.models.errors import ModelError
from steelyard.models.estimates import Estimates
from steelyard.models.maximum_entropy.configuration import ConfigurationModel
from steelyard.models.maximum_entropy.density import DensityModel
from steelyard.models.maximum_entropy.geometric import GeometricModel
from steelyard.models.observed_links import observed_links

COVARIATES = ("size", "distance")


@pytest.fixture(scope="module")
def dyads() -> Dyads:
    definitions = {
        "size": NodeCovariate("throughput", End.BOTH, Transform.LOG),
        "distance": DyadCovariate("sea_distance", Transform.LOG),
    }
    return Dyads(dataset_registry().get("islands").load(), definitions)


LINK_MODELS: list[Model] = [DensityModel(), LogitModel(COVARIATES), ConfigurationModel()]
WEIGHT_MODELS: list[Model] = [GeometricModel(COVARIATES), GeometricModel(), LognormalModel(COVARIATES)]


@pytest.mark.parametrize("weights", WEIGHT_MODELS, ids=lambda m: f"{m.name} {len(m.covariates)}")
@pytest.mark.parametrize("links", LINK_MODELS, ids=lambda m: m.name)
def test_log_likelihood_is_the_sum_of_the_parts(links: Model, weights: Model, dyads: Dyads) -> None:
    """Link part over all dyads, weight part over the observed links, each fitted alone; parameters add up."""
    both = TwoPart(links, weights).fit(dyads)
    first, second = links.fit(dyads), weights.fit(dyads)
    linked = observed_links(dyads)
    flows = dyads.counts if weights.measure is Measure.COUNTS else dyads.weights
    of_links = first.distribution(dyads).log_density(dyads.links.astype(float)).sum()
    of_weights = second.distribution(linked).log_density(flows[dyads.links]).sum()
    assert both.distribution(dyads).log_density(flows).sum() == pytest.approx(
        of_links + of_weights, rel=1e-12
    )
    assert both.n_parameters == first.n_parameters + second.n_parameters
    assert len(both.estimates) == len(first.estimates) + len(second.estimates)
    mean = first.expected_weight(dyads) * second.expected_weight(dyads)
    np.testing.assert_allclose(both.expected_weight(dyads), mean, rtol=1e-12)
    np.testing.assert_allclose(both.distribution(dyads).mean, mean, rtol=1e-12)
    np.testing.assert_allclose(
        both.distribution(dyads).link_probability, first.expected_weight(dyads), rtol=1e-12
    )
    assert both.measure is weights.measure


def test_declarations_are_those_of_both_parts() -> None:
    mixed = TwoPart(ConfigurationModel(), LognormalModel(COVARIATES))
    assert mixed.name == "configuration x lognormal"
    assert mixed.family is Family.MIXED
    assert mixed.part is Part.JOINT
    assert mixed.measure is Measure.AMOUNTS
    assert mixed.information is Information.DEGREES
    # The configuration model knows nothing of unseen nodes, so neither does the pair.
    assert mixed.holdouts == {Holdout.DYADS, Holdout.PERIODS}
    assert mixed.requires.covariates is Need.REQUIRED
    assert TwoPart(DensityModel(), GeometricModel()).requires.covariates is Need.OPTIONAL
    assert TwoPart(DensityModel(), GeometricModel()).family is Family.MAXIMUM_ENTROPY
    assert TwoPart(LogitModel(()), LognormalModel(())).family is Family.ECONOMETRIC
    assert TwoPart(DensityModel(), GeometricModel()) == TwoPart(DensityModel(), GeometricModel())
    for line in (mixed.summary, mixed.formula, mixed.parameters, mixed.caution, mixed.sources):
        assert line.strip()


@pytest.mark.parametrize(
    ("links", "weights", "sentence"),
    [
        (
            GeometricModel(),
            GeometricModel(),
            "links part must be a model of links; 'geometric' is a model of weights",
        ),
        (
            DensityModel(),
            DensityModel(),
            "the weights part must be a model of weights; 'density' is a model of links",
        ),
        (DensityModel(), PoissonModel(()), "'poisson' is a model of both at once"),
        (NegativeBinomialModel(()), GeometricModel(), "'negative_binomial' is a model of both at once"),
        (TwoPart(DensityModel(), GeometricModel()), GeometricModel(), "is a model of both at once"),
    ],
)
def test_wrong_parts_are_refused(links: Model, weights: Model, sentence: str) -> None:
    with pytest.raises(ModelError, match=sentence):
        TwoPart(links, weights)


@dataclass(frozen=True)
class MeanOnly(GeometricModel):
    """A weights model that states only a mean."""

    measure: ClassVar[None] = None  # type: ignore[assignment]  # the point of the test


def test_a_mean_is_no_part() -> None:
    with pytest.raises(ModelError, match="states only a mean"):
        TwoPart(DensityModel(), MeanOnly())


@dataclass(frozen=True)
class Stub:
    """A fitted law with a given certificate and mean."""

    convergence: Convergence
    mean: float = 1.0
    n_parameters: int = 1
    measure: Measure = Measure.COUNTS
    estimates: ClassVar[Estimates] = Estimates(())

    def expected_weight(self, dyads: Dyads, /) -> np.ndarray:
        return np.full(len(dyads), self.mean)

    def distribution(self, dyads: Dyads, /) -> object:
        return GeometricModel().fit(dyads).distribution(dyads)


def test_one_bad_part_spoils_the_certificate(dyads: Dyads) -> None:
    good, bad = Convergence(True, 3, 1e-12), Convergence(False, 7, 0.2, "still moving")
    for parts, said in (((good, bad), "weights: still moving"), ((bad, good), "links: still moving")):
        found = FittedTwoPart(*(Stub(p) for p in parts)).convergence  # type: ignore[arg-type]  # stubs
        assert not found.converged
        assert found.residual == 0.2
        assert found.iterations == 10
        assert found.message == said
    assert FittedTwoPart(Stub(good), Stub(good)).convergence.converged  # type: ignore[arg-type]  # stubs


def test_zero_times_infinity_is_zero(dyads: Dyads) -> None:
    good = Convergence(True, 0, 0.0)
    found = FittedTwoPart(Stub(good, 0.0), Stub(good, np.inf))  # type: ignore[arg-type]  # stubs
    np.testing.assert_array_equal(found.expected_weight(dyads), 0.0)


def test_the_links_part_must_state_a_law_of_links(dyads: Dyads) -> None:
    good = Convergence(True, 0, 0.0)
    with pytest.raises(ModelError, match="a law of links must give a LinkLaw; got GeometricLinkLaw"):
        FittedTwoPart(Stub(good), Stub(good)).distribution(dyads)  # type: ignore[arg-type]  # stubs
