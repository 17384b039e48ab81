"""Estimates as rows: Wald inference, lookup, and what separation, aliasing and repair say of themselves."""

from __future__ import annotations

from math import exp, inf, isnan, nan

import numpy as np
import pytest
from scipy.sparse import csr_array

from steelyard.datasets import DyadCovariate, Dyads, FlowNetwork, Provenance
from steelyard.models.econometric.logit import LogitModel
from steelyard.models.econometric.lognormal import LognormalModel
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.models.errors import ModelError
from steelyard.models.estimates import ErrorKind, Estimate, EstimatePart, Estimates, Status
from steelyard.models.maximum_entropy.geometric import GeometricModel
from steelyard.models.observed_links import observed_links

JOINT, LINKS = EstimatePart.JOINT, EstimatePart.LINKS


def test_interval_of_a_slope() -> None:
    """Normal theory: 1.959964 is the two-sided 95 % point; z = 2 has p = 0.04550026 (tables, from memory)."""
    row = Estimate(JOINT, "distance", -1.0, {ErrorKind.MODEL: 0.5, ErrorKind.ROBUST: 1.0})
    found = row.interval(ErrorKind.MODEL)
    assert found.z == -2.0
    assert found.p_value == pytest.approx(0.0455002639, rel=1e-8)
    assert (found.lower, found.upper) == pytest.approx((-1.0 - 0.9799819923, -1.0 + 0.9799819923), rel=1e-8)
    assert row.interval(ErrorKind.MODEL, level=0.9).upper == pytest.approx(
        -1.0 + 1.6448536270 * 0.5, rel=1e-8
    )
    assert row.interval(ErrorKind.ROBUST).z == -1.0
    # Far out the p-value must not round to zero.
    assert Estimate(JOINT, "x", 30.0, {ErrorKind.MODEL: 1.0}).interval(ErrorKind.MODEL).p_value > 0


def test_interval_of_a_scale_is_made_on_the_log() -> None:
    """alpha = 2 with error 0.5: log alpha has error 0.25, and there is no z."""
    row = Estimate(EstimatePart.DISPERSION, "alpha", 2.0, {ErrorKind.MODEL: 0.5}, positive=True)
    found = row.interval(ErrorKind.MODEL)
    assert isnan(found.z)
    assert isnan(found.p_value)
    assert found.lower == pytest.approx(2.0 * exp(-0.25 * 1.959963985), rel=1e-8)
    assert found.upper == pytest.approx(2.0 * exp(0.25 * 1.959963985), rel=1e-8)


@pytest.mark.parametrize(
    "row",
    [
        Estimate(JOINT, "x", 1.0, {}),
        Estimate(JOINT, "x", 1.0, {ErrorKind.MODEL: nan}),
        Estimate(JOINT, "x", 1.0, {ErrorKind.MODEL: 0.0}),
        Estimate(JOINT, "x", 1.0, {ErrorKind.MODEL: inf}),
        Estimate(JOINT, "x", inf, {ErrorKind.MODEL: 1.0}, Status.BOUNDARY),
        Estimate(JOINT, "x", 0.0, {ErrorKind.MODEL: 1.0}, Status.FIXED),
    ],
)
def test_no_inference_where_there_is_none(row: Estimate) -> None:
    found = row.interval(ErrorKind.MODEL)
    assert all(isnan(x) for x in (found.z, found.p_value, found.lower, found.upper))


def test_rows_are_found_by_term_and_part() -> None:
    rows = Estimates((Estimate(LINKS, "constant", 1.0, {}),))
    both = rows + rows.with_part(JOINT) + Estimates((Estimate(JOINT, "alpha", 2.0, {}),))
    assert len(both) == 3
    assert [r.term for r in both] == ["constant", "constant", "alpha"]
    assert both.row("constant", JOINT).part is JOINT
    assert both.row("alpha").value == 2.0
    with pytest.raises(KeyError, match="2 estimates are named 'constant'"):
        both.row("constant")
    with pytest.raises(KeyError, match="0 estimates are named 'beta'"):
        both.row("beta")


# --- what fits put into rows ------------------------------------------------------------------------------


def dyads_with(**columns: np.ndarray) -> Dyads:
    """Fifteen invented places; `flows` and any dyad covariates, directed."""
    flows = columns.pop("flows")
    labels = tuple(f"p{i}" for i in range(len(flows)))
    network = FlowNetwork(labels, csr_array(flows), True, 1.0, {}, columns, Provenance("made in a test"))
    return Dyads(network, {name: DyadCovariate(name) for name in columns})


def example(seed: int = 3) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(seed)
    n = 15
    x = rng.normal(size=(n, n))
    flows = rng.poisson(np.exp(0.5 + 0.6 * x) * rng.gamma(1.0, 1.0, (n, n))).astype(float)
    np.fill_diagonal(flows, 0)
    return {"flows": flows, "x": x}


def test_terms_come_in_the_order_of_the_covariates() -> None:
    columns = example()
    columns["y"] = np.random.default_rng(9).normal(size=columns["x"].shape)
    dyads = dyads_with(**columns)
    found = PoissonModel(("y", "x")).fit(dyads)
    assert [r.term for r in found.estimates] == ["constant", "y", "x"]
    swapped = PoissonModel(("x", "y")).fit(dyads)
    assert swapped.estimates.row("x").value == pytest.approx(found.estimates.row("x").value, rel=1e-9)
    for row in found.estimates:
        assert set(row.standard_errors) == set(ErrorKind)
        assert row.part is EstimatePart.JOINT


def test_an_aliased_term_is_fixed_and_says_so() -> None:
    columns = example()
    dyads = dyads_with(**columns, twice=2 * columns["x"])
    found = PoissonModel(("x", "twice")).fit(dyads)
    row = found.estimates.row("twice")
    assert (row.value, row.status, dict(row.standard_errors)) == (0.0, Status.FIXED, {})
    assert "set aside" in row.note
    assert found.n_parameters == 2
    plain = PoissonModel(("x",)).fit(dyads)
    np.testing.assert_allclose(found.expected_weight(dyads), plain.expected_weight(dyads), rtol=1e-12)
    # Named first, it is the one that is estimated.
    assert PoissonModel(("twice", "x")).fit(dyads).estimates.row("x").status is Status.FIXED


@pytest.mark.parametrize("scale", [1.0, 1e-8, 1e12])
@pytest.mark.parametrize("model", [PoissonModel, NegativeBinomialModel, LogitModel])
def test_a_separated_term_is_infinite_and_decides_its_dyads(model: type[PoissonModel], scale: float) -> None:
    """No flow where a dummy is 1: its slope is minus infinity, the mean there is exactly 0, also out of sample."""
    columns = example()
    closed = np.zeros_like(columns["x"])
    closed[:, 4] = closed[7, :] = 1.0
    columns["flows"] = columns["flows"] * (1 - closed)
    columns["x"], closed = scale * columns["x"], scale * closed
    mask = np.random.default_rng(2).random(closed.shape) < 0.8
    dyads = dyads_with(**columns, closed=closed)
    found = model(("x", "closed")).fit(dyads.select(mask))
    row = found.estimates.row("closed")
    assert (row.value, row.status) == (-inf, Status.BOUNDARY)
    assert isnan(row.interval(ErrorKind.MODEL).p_value)
    assert "separated" in found.convergence.message
    # The terms that the direction does not move keep their finite estimates.
    assert found.estimates.row("constant").status is Status.FREE
    assert found.estimates.row("x").status is Status.FREE
    expected = found.expected_weight(dyads)
    shut = dyads.column("closed") > 0
    np.testing.assert_array_equal(expected[shut], 0.0)
    assert (expected[~shut] > 0).all()
    # The rest is as if the closed dyads did not exist.
    rest = model(("x",)).fit(dyads.select(mask & (closed == 0)))
    np.testing.assert_allclose(expected[~shut], rest.expected_weight(dyads)[~shut], rtol=1e-8)
    assert found.n_parameters == rest.n_parameters


def test_alpha_has_the_delta_method_error() -> None:
    """Profile check: the log-likelihood falls by 1/2 about one error away on the log scale, to third order."""
    dyads = dyads_with(**example())
    found = NegativeBinomialModel(("x",)).fit(dyads)
    alpha = found.estimates.row("alpha")
    assert alpha.positive
    assert alpha.part is EstimatePart.DISPERSION
    assert alpha.value == found.alpha
    assert 0 < alpha.standard_errors[ErrorKind.MODEL] < alpha.value
    assert found.n_parameters == 3


def test_sigma_of_the_lognormal() -> None:
    """sigma^2 is the mean squared residual, its model error sigma / sqrt(2 n): closed forms."""
    columns = example()
    dyads = dyads_with(**columns)
    found = LognormalModel(("x",)).fit(dyads)
    n = dyads.n_links
    linked = observed_links(dyads)
    residual = np.log(linked.weights) - found.index.on(linked)
    assert found.sigma == pytest.approx(np.sqrt((residual**2).mean()), rel=1e-10)
    error = found.estimates.row("sigma").standard_errors[ErrorKind.MODEL]
    assert error == pytest.approx(found.sigma / np.sqrt(2 * n), rel=1e-9)


def test_exact_lognormal_flows_are_refused() -> None:
    columns = example()
    flows = np.exp(1.0 + 0.5 * columns["x"])
    np.fill_diagonal(flows, 0)
    with pytest.raises(ModelError, match="explain all 210 positive flows exactly"):
        LognormalModel(("x",)).fit(dyads_with(flows=flows, x=columns["x"]))


def test_observed_links_are_the_dyads_with_a_flow() -> None:
    dyads = dyads_with(**example())
    mask = np.random.default_rng(5).random((15, 15)) < 0.5
    some = dyads.select(mask)
    linked = observed_links(some)
    assert len(linked) == some.n_links
    np.testing.assert_array_equal(linked.weights, some.weights[some.links])
    np.testing.assert_array_equal(linked.origin, some.origin[some.links])
    with pytest.raises(ModelError, match="none of the 210 dyads carries a flow"):
        observed_links(dyads_with(flows=np.zeros((15, 15))))


@pytest.mark.parametrize("model", [LognormalModel(("x",)), GeometricModel(("x",))])
def test_weights_models_refuse_a_network_without_links(model: GeometricModel) -> None:
    columns = example()
    with pytest.raises(ModelError, match="carries a flow"):
        model.fit(dyads_with(flows=np.zeros((15, 15)), x=columns["x"]))


def test_a_repaired_variance_says_so() -> None:
    """Some seeds give an indefinite node-clustered matrix: then every row of the fit says so of that kind alone."""
    noted = 0
    for seed in range(12):
        found = PoissonModel(("x",)).fit(dyads_with(**example(seed)))
        assert {row.note_for(ErrorKind.MODEL) for row in found.estimates} == {""}
        notes = {row.note_for(ErrorKind.NODE_CLUSTERED) for row in found.estimates}
        assert len(notes) == 1
        noted += "node-clustered variance repaired" in notes.pop()
    assert 0 < noted < 12


def test_three_places_have_no_node_clustered_error() -> None:
    """Any two dyads of three places share one, so that variance is zero: no z test, and no warning."""
    flows = np.array([[0.0, 3, 5], [2, 0, 7], [4, 4, 0]])
    row = PoissonModel(()).fit(dyads_with(flows=flows)).estimates.row("constant")
    assert row.value == pytest.approx(np.log(flows.sum() / 6), rel=1e-10)
    assert row.standard_errors[ErrorKind.NODE_CLUSTERED] == 0.0
    assert isnan(row.interval(ErrorKind.NODE_CLUSTERED).z)


def test_a_separated_direction_holds_far_from_zero() -> None:
    """A dummy counted from ten million: the direction needs the constant too, and still decides its dyads."""
    columns = example()
    closed = np.zeros_like(columns["x"])
    closed[:, 4] = 1.0
    columns["flows"] = columns["flows"] * (1 - closed)
    dyads = dyads_with(**columns, closed=closed + 1e7)
    found = PoissonModel(("x", "closed")).fit(dyads)
    assert found.convergence.converged
    expected = found.expected_weight(dyads)
    np.testing.assert_array_equal(expected == 0.0, dyads.column("closed") > 1e7)
