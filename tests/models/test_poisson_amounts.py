"""Poisson pseudo-likelihood on amounts: a mean only, and the same in every unit."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.sparse import csr_array

from steelyard.datasets import Dyads, Floats, FlowNetwork, Provenance
from steelyard.models import ErrorKind, Status
from steelyard.models.checks import EXAMPLE_COVARIATES, ExampleFlows
from steelyard.models.econometric.poisson import FittedPoissonMean, PoissonModel

OPTIONS: list[tuple[bool, dict[str, bool]]] = [
    (True, {}),
    (False, {}),
    (True, {"origin_effects": True, "destination_effects": True}),
    (True, {"origin_effects": True}),
    (True, {"node_effects": True}),
    (False, {"node_effects": True}),
]


def fitted(directed: bool, options: dict[str, bool], scale: float) -> tuple[FittedPoissonMean, Dyads]:
    """The example's flows times a number and not whole."""
    flows = ExampleFlows(directed)
    dyads = flows.with_drawn(flows.dyads.weights * scale * np.pi).dyads
    return PoissonModel(EXAMPLE_COVARIATES, amounts=True, **options).fit(dyads), dyads


@pytest.mark.parametrize("scale", [1e-12, 1e-3, 10.0, 1e9])
@pytest.mark.parametrize(("directed", "options"), OPTIONS)
def test_scale_moves_the_constant_alone(directed: bool, options: dict[str, bool], scale: float) -> None:
    """Slopes and their robust and clustered errors stay; the mean scales; model errors go with the root."""
    (one, dyads), (other, scaled) = fitted(directed, options, 1.0), fitted(directed, options, scale)
    assert one.convergence.converged
    assert other.convergence.converged
    np.testing.assert_allclose(other.expected_weight(scaled), scale * one.expected_weight(dyads), rtol=1e-9)
    for before, after in zip(one.estimates, other.estimates, strict=True):
        assert (before.term, before.status) == (after.term, after.status)
        for kind, error in before.standard_errors.items():
            factor = scale**-0.5 if kind is ErrorKind.MODEL else 1.0
            assert after.standard_errors[kind] == pytest.approx(factor * error, rel=1e-7)
        if before.term in EXAMPLE_COVARIATES and before.status is Status.FREE:
            assert after.value == pytest.approx(before.value, rel=1e-9)
    if "constant" in [e.term for e in one.estimates]:
        shift = other.estimates.row("constant").value - one.estimates.row("constant").value
        assert shift == pytest.approx(np.log(scale), abs=1e-8)


@pytest.mark.parametrize(("directed", "options"), OPTIONS)
def test_on_whole_flows_it_is_the_fit_to_counts(directed: bool, options: dict[str, Any]) -> None:
    dyads = ExampleFlows(directed).dyads
    counts = PoissonModel(EXAMPLE_COVARIATES, **options).fit(dyads)
    amounts = PoissonModel(EXAMPLE_COVARIATES, amounts=True, **options).fit(dyads)
    assert counts.n_parameters == amounts.n_parameters
    for first, second in zip(counts.estimates, amounts.estimates, strict=True):
        assert second.value == pytest.approx(first.value, rel=1e-9, abs=1e-9)
        for kind, error in first.standard_errors.items():
            assert second.standard_errors[kind] == pytest.approx(error, rel=1e-7)


def test_it_states_a_mean_and_no_law() -> None:
    found, _ = fitted(True, {}, 1.0)
    assert not hasattr(found, "distribution")
    assert not hasattr(found, "measure")
    assert all("model error depends on the unit" in e.note for e in found.estimates)


def test_small_amounts_are_not_rounded_to_counts() -> None:
    """A constant alone fits the average amount."""
    flows: Floats = np.array([[0.0, 0.2, 0.01], [0.0, 0.0, 0.3], [0.04, 0.0, 0.0]])
    network = FlowNetwork(("a", "b", "c"), csr_array(flows), True, 1.0, {}, {}, Provenance("made in a test"))
    mean = PoissonModel((), amounts=True).fit(Dyads(network)).expected_weight(Dyads(network))
    np.testing.assert_allclose(mean, 0.55 / 6, rtol=1e-12)
