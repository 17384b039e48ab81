"""The estimation core: against statsmodels and closed forms, under changes of scale and order, at its edges."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats
from scipy.sparse import csr_array

from steelyard.datasets import (
    DistanceCovariate,
    DyadCovariate,
    Dyads,
    End,
    Floats,
    FlowNetwork,
    MatchCovariate,
    NodeCovariate,
    Transform,
    dataset_registry,
)
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel, fit_negative_binomial
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.models.errors import ModelError
from steelyard.models.estimates import ErrorKind, Status
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import GeometricExcess, Logit, LogNormal, NegativeBinomialQuadratic, Poisson
from steelyard.models.linear_index import node_pairs
from steelyard.models.special import negative_binomial_log_mass, poisson_log_mass

COVARIATES = {
    "islands": {
        "origin": NodeCovariate("throughput", End.ORIGIN, Transform.LOG),
        "destination": NodeCovariate("throughput", End.DESTINATION, Transform.LOG),
        "distance": DyadCovariate("sea_distance", Transform.LOG),
        "language": MatchCovariate("language"),
    },
    "state-air-2008": {
        "origin": NodeCovariate("population", End.ORIGIN, Transform.LOG),
        "destination": NodeCovariate("population", End.DESTINATION, Transform.LOG),
        "distance": DistanceCovariate("latitude", "longitude", Transform.LOG),
    },
}


@pytest.fixture(scope="module", params=sorted(COVARIATES))
def dyads(request: pytest.FixtureRequest) -> Dyads:
    return Dyads(dataset_registry().get(request.param).load(), COVARIATES[request.param])


def negative_binomial_total(w: Floats, index: Floats, alpha: float) -> float:
    """The log-likelihood that statsmodels states, evaluated anywhere; scipy's mass, not ours."""
    size = 1.0 / alpha
    return float(stats.nbinom.logpmf(w, size, size / (size + np.exp(index))).sum())


def test_poisson_against_statsmodels(dyads: Dyads) -> None:
    design, w = dyads.design(dyads.covariates), dyads.counts
    found = fit_indices(Poisson(w), [design], node_pairs(dyads))
    outside = sm.GLM(w, design, family=sm.families.Poisson()).fit(tol=1e-13, maxiter=200)
    errors = np.sqrt(np.diag(found.covariances[ErrorKind.MODEL]))
    assert found.convergence.converged
    # "Estimates to 1e-6 of a standard error".
    assert (np.abs(found.coefficients[0] - outside.params) / errors).max() < 1e-6
    np.testing.assert_allclose(errors, outside.bse, rtol=1e-7)
    ours = poisson_log_mass(w, np.exp(design @ found.coefficients[0])).sum()
    assert ours == pytest.approx(outside.llf, rel=1e-10)


def test_negative_binomial_against_statsmodels(dyads: Dyads) -> None:
    """Its own likelihood at our estimates is never below the best that it finds, from its start or from ours."""
    design, w = dyads.design(dyads.covariates), dyads.counts
    found = fit_negative_binomial(w, design)
    assert found.convergence.converged
    alpha = float(np.exp(found.coefficients[1][0]))
    ours = negative_binomial_total(w, design @ found.coefficients[0], alpha)
    model = sm.NegativeBinomial(w, design)
    point = np.append(found.coefficients[0], alpha)
    start = np.append(fit_indices(Poisson(w), [design]).coefficients[0], 2.0)
    best = max(
        model.fit(start_params=p, method="bfgs", maxiter=500, disp=0, warn_convergence=False).llf
        for p in (start, point * 1.01)
    )
    # After a fit its parameters are slopes and alpha, not log alpha.
    assert model.loglike(point) == pytest.approx(ours, rel=1e-9)
    assert ours >= best - 1e-9 * abs(best)
    # Its Hessian turns its score at our estimates into a step: shorter than 1e-6 of a standard error.
    information = -model.hessian(point)
    step = np.linalg.solve(information, model.score(point))
    assert (np.abs(step) / np.sqrt(np.diag(np.linalg.inv(information)))).max() < 1e-6


def test_negative_binomial_at_fixed_alpha_is_a_glm(dyads: Dyads) -> None:
    """Given our alpha, iteratively reweighted least squares must give our slopes."""
    design, w = dyads.design(dyads.covariates), dyads.counts
    found = fit_negative_binomial(w, design)
    alpha = float(np.exp(found.coefficients[1][0]))
    family = sm.families.NegativeBinomial(alpha=alpha)
    outside = sm.GLM(w, design, family=family).fit(tol=1e-13, maxiter=300)
    errors = np.sqrt(np.diag(found.covariances[ErrorKind.MODEL]))[: design.shape[1]]
    assert (np.abs(found.coefficients[0] - outside.params) / errors).max() < 1e-5


def test_logit_against_statsmodels(dyads: Dyads) -> None:
    design, links = dyads.design(dyads.covariates), dyads.links.astype(float)
    found = fit_indices(Logit(links), [design])
    outside = sm.Logit(links, design).fit(disp=0, method="newton", tol=1e-12)
    errors = np.sqrt(np.diag(found.covariances[ErrorKind.MODEL]))
    assert (np.abs(found.coefficients[0] - outside.params) / errors).max() < 1e-6
    np.testing.assert_allclose(errors, outside.bse, rtol=1e-7)
    assert Logit(links).value([design @ found.coefficients[0]]) == pytest.approx(outside.llf, rel=1e-11)


def test_lognormal_is_least_squares(dyads: Dyads) -> None:
    """Slopes of OLS; sigma^2 the mean squared residual; HC1 with one more parameter counted, sigma.

    The model variance of sigma is sigma^2 / (2 n), a closed form.
    """
    linked = dyads.links
    design, w = dyads.design(dyads.covariates)[linked], dyads.weights[linked]
    found = fit_indices(LogNormal(w), [design, np.ones((len(w), 1))])
    outside = sm.OLS(np.log(w), design).fit()
    np.testing.assert_allclose(found.coefficients[0], outside.params, rtol=1e-9)
    n, k = design.shape
    assert np.exp(found.coefficients[1][0]) ** 2 == pytest.approx((outside.resid**2).mean(), rel=1e-11)
    model = found.covariances[ErrorKind.MODEL]
    np.testing.assert_allclose(model[:k, :k], outside.cov_params() * (n - k) / n, rtol=1e-8)
    assert model[k, k] == pytest.approx(1 / (2 * n), rel=1e-9)
    robust = found.covariances[ErrorKind.ROBUST][:k, :k]
    np.testing.assert_allclose(robust, outside.cov_HC0 * n / (n - k - 1), rtol=1e-7)


def test_geometric_is_a_negative_binomial_of_the_excess(dyads: Dyads) -> None:
    """Same estimates and log-likelihood as statsmodels' negative binomial with alpha = 1 on w - 1."""
    linked = dyads.links
    design, w = dyads.design(dyads.covariates)[linked], dyads.counts[linked]
    found = fit_indices(GeometricExcess(w), [design])
    outside = sm.GLM(w - 1, design, family=sm.families.NegativeBinomial(alpha=1.0)).fit(
        tol=1e-13, maxiter=300
    )
    errors = np.sqrt(np.diag(found.covariances[ErrorKind.MODEL]))
    assert (np.abs(found.coefficients[0] - outside.params) / errors).max() < 1e-6
    assert GeometricExcess(w).value([design @ found.coefficients[0]]) == pytest.approx(outside.llf, rel=1e-10)


# --- invariance -------------------------------------------------------------------------------------------

KINDS: dict[str, Callable[[Floats, Floats], IndexFit]] = {
    "poisson": lambda w, x: fit_indices(Poisson(w), [x]),
    "negative binomial": fit_negative_binomial,
    "logit": lambda w, x: fit_indices(Logit((w > 3).astype(float)), [x]),
    "geometric": lambda w, x: fit_indices(GeometricExcess(w + 1), [x]),
    "lognormal": lambda w, x: fit_indices(LogNormal(w + 0.5), [x, np.ones((len(w), 1))]),
}


def log_likelihood(kind: str, w: Floats, design: Floats, found: IndexFit) -> float:
    index = design @ found.coefficients[0]
    if kind == "poisson":
        return float(poisson_log_mass(w, np.exp(index)).sum())
    if kind == "negative binomial":
        return float(negative_binomial_log_mass(w, np.exp(index), np.exp(-found.coefficients[1][0])).sum())
    if kind == "logit":
        return Logit((w > 3).astype(float)).value([index])
    if kind == "geometric":
        return GeometricExcess(w + 1).value([index])
    return LogNormal(w + 0.5).value([index, np.full(len(w), found.coefficients[1][0])])


def example() -> tuple[Floats, Floats]:
    rng = np.random.default_rng(21)
    n = 400
    design = np.column_stack([np.ones(n), rng.normal(size=(n, 3))])
    return rng.poisson(np.exp(design @ [1.0, 0.5, -0.3, 0.0]) * rng.gamma(2, 0.5, n)).astype(float), design


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("factor", [1e-6, 1e-3, 1e3, 1e9])
def test_rescaled_covariates(kind: str, factor: float) -> None:
    """Columns in another unit: slopes and errors divide by it, and the log-likelihood stays to 1e-10."""
    w, design = example()
    scale = np.array([1.0, factor, 1.0 / factor, 1.0])
    plain, other = KINDS[kind](w, design), KINDS[kind](w, design * scale)
    assert plain.convergence.converged
    assert other.convergence.converged
    errors = np.sqrt(np.diag(plain.covariances[ErrorKind.MODEL]))[:4]
    assert (np.abs(other.coefficients[0] * scale - plain.coefficients[0]) / errors).max() < 1e-6
    for error_kind in (ErrorKind.MODEL, ErrorKind.ROBUST):
        ours = np.sqrt(np.diag(other.covariances[error_kind]))[:4] * scale
        np.testing.assert_allclose(ours, np.sqrt(np.diag(plain.covariances[error_kind]))[:4], rtol=1e-6)
    a = log_likelihood(kind, w, design, plain)
    assert log_likelihood(kind, w, design * scale, other) == pytest.approx(a, rel=1e-10)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("offset", [1e3, 1e6])
def test_shifted_covariates(kind: str, offset: float) -> None:
    """A column counted from elsewhere moves the constant alone."""
    w, design = example()
    moved = design.copy()
    moved[:, 1] += offset
    plain, other = KINDS[kind](w, design), KINDS[kind](w, moved)
    errors = np.sqrt(np.diag(plain.covariances[ErrorKind.MODEL]))[:4]
    gap = np.abs(other.coefficients[0] - plain.coefficients[0])[1:]
    assert (gap / errors[1:]).max() < 1e-6
    constant = other.coefficients[0][0] + offset * other.coefficients[0][1]
    assert abs(constant - plain.coefficients[0][0]) / errors[0] < 1e-6


@pytest.mark.parametrize("kind", KINDS)
def test_order_of_observations_and_columns(kind: str) -> None:
    w, design = example()
    rng = np.random.default_rng(1)
    rows, columns = rng.permutation(len(w)), np.array([0, 3, 1, 2])
    plain, other = KINDS[kind](w, design), KINDS[kind](w[rows], design[rows][:, columns])
    errors = np.sqrt(np.diag(plain.covariances[ErrorKind.MODEL]))[:4]
    assert (np.abs(other.coefficients[0] - plain.coefficients[0][columns]) / errors[columns]).max() < 1e-6


@pytest.mark.parametrize("kind", KINDS)
def test_an_aliased_column_changes_nothing_else(kind: str) -> None:
    w, design = example()
    more = np.column_stack([design, 2 * design[:, 1] - design[:, 2]])
    plain, other = KINDS[kind](w, design), KINDS[kind](w, more)
    assert other.aliased[0] == (4,)
    assert other.rank == plain.rank
    np.testing.assert_allclose(other.coefficients[0], [*plain.coefficients[0], 0.0], rtol=1e-9, atol=1e-12)
    errors = np.diag(other.covariances[ErrorKind.MODEL])
    assert np.isnan(errors[4])
    assert np.isfinite(np.delete(errors, 4)).all()


# --- edges ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("top", [1e3, 1e6, 1e9, 1e12])
@pytest.mark.parametrize("alpha", [0.01, 1.0, 4.0])
def test_negative_binomial_of_large_weights(top: float, alpha: float) -> None:
    """Certified with weights up to 1e12, and the true slope within five standard errors."""
    rng = np.random.default_rng(1)
    n = 600
    design = np.column_stack([np.ones(n), rng.normal(size=n)])
    mean = np.exp(np.log(top) - 3 + design[:, 1]) * rng.gamma(1 / alpha, alpha, n)
    w = rng.poisson(mean).astype(float)
    found = fit_negative_binomial(w, design)
    assert found.convergence.converged, found.convergence
    assert found.convergence.iterations < 20
    error = float(np.sqrt(found.covariances[ErrorKind.MODEL][1, 1]))
    assert abs(found.coefficients[0][1] - 1.0) < 5 * error
    assert abs(np.log(alpha) - found.coefficients[1][0]) < 0.5


@pytest.mark.parametrize("top", [1e6, 1e12])
def test_poisson_of_large_weights(top: float) -> None:
    rng = np.random.default_rng(2)
    n = 500
    design = np.column_stack([np.ones(n), rng.normal(size=n)])
    mean = top * np.exp(0.5 * design[:, 1])
    w = np.rint(mean + np.sqrt(mean) * rng.normal(size=n))
    found = fit_indices(Poisson(w), [design])
    assert found.convergence.converged, found.convergence
    error = float(np.sqrt(found.covariances[ErrorKind.MODEL][1, 1]))
    assert abs(found.coefficients[0][1] - 0.5) < 5 * error


def test_negative_binomial_of_poisson_counts() -> None:
    """Equidispersed counts put alpha anywhere from 0 to small values; each fit must be certified.

    Where the squared residuals exceed the Poisson variance there is an alpha > 0; else the fit is the Poisson.
    """
    edges = 0
    for seed in range(150):
        rng = np.random.default_rng(seed)
        n = 300
        design = np.column_stack([np.ones(n), rng.normal(size=n)])
        w = rng.poisson(np.exp(1.0 + seed % 5 + 0.5 * design[:, 1])).astype(float)
        found = fit_negative_binomial(w, design)
        assert found.convergence.converged, (seed, found.convergence)
        poisson = fit_indices(Poisson(w), [design])
        mean = np.exp(design @ poisson.coefficients[0])
        at_edge = len(found.coefficients) == 1
        if at_edge:
            assert ((w - mean) ** 2 - w).sum() <= 0
            np.testing.assert_array_equal(found.coefficients[0], poisson.coefficients[0])
            assert found.rank == 2
        else:
            alpha = float(np.exp(found.coefficients[1][0]))
            gain = log_likelihood("negative binomial", w, design, found)
            assert gain >= log_likelihood("poisson", w, design, poisson) - 1e-9
            assert 0 < alpha < 0.5
            assert found.rank == 3
        edges += at_edge
    assert 30 < edges < 120


def test_a_maximum_inside_is_found_although_the_likelihood_falls_at_alpha_0() -> None:
    """The slope at alpha = 0 is a local matter: in small samples a higher maximum may lie inside.

    The profile over a grid of alpha, each point a GLM of statsmodels, is never above ours; in some of these
    samples the sign of the slope would have chosen the Poisson law and lost up to several units.
    """
    hidden = 0
    for seed in (52, 62, 119, 146, 194, 343, 7, 8, 9):
        rng = np.random.default_rng(seed)
        n = int(rng.integers(8, 40))
        design = np.column_stack([np.ones(n), rng.normal(size=n) * rng.choice([1, 2])])
        w = rng.poisson(np.exp(0.5 + design[:, 1]) * rng.gamma(5, 0.2, n)).astype(float)
        found = fit_negative_binomial(w, design)
        assert found.convergence.converged
        kind = "poisson" if len(found.coefficients) == 1 else "negative binomial"
        ours = log_likelihood(kind, w, design, found)
        poisson = fit_indices(Poisson(w), [design])
        profile = [log_likelihood("poisson", w, design, poisson)]
        for alpha in np.geomspace(1e-3, 3.0, 30):
            family = sm.families.NegativeBinomial(alpha=alpha)
            start = poisson.coefficients[0]
            profile.append(sm.GLM(w, design, family=family).fit(start_params=start, maxiter=200).llf)
        assert ours >= max(profile) - 1e-8
        mean = np.exp(design @ poisson.coefficients[0])
        hidden += kind == "negative binomial" and ((w - mean) ** 2 - w).sum() <= 0
    assert hidden >= 3


def test_underdispersed_flows_do_not_count_alpha() -> None:
    """The model as a user meets it: alpha 0 at the boundary, one parameter fewer, the law that of Poisson."""
    network = dataset_registry().get("islands").load()
    dyads = Dyads(network, COVARIATES["islands"])
    flat = Dyads(_with_equal_flows(network), COVARIATES["islands"])
    found = NegativeBinomialModel(("distance",)).fit(flat)
    poisson = PoissonModel(("distance",)).fit(flat)
    alpha = found.estimates.row("alpha")
    assert alpha.status is Status.BOUNDARY
    assert alpha.value == 0.0
    assert found.n_parameters == poisson.n_parameters == 2
    assert "alpha at its edge 0" in found.convergence.message
    np.testing.assert_array_equal(
        found.distribution(dyads).log_density(flat.counts),
        poisson.distribution(dyads).log_density(flat.counts),
    )


def _with_equal_flows(network: FlowNetwork) -> FlowNetwork:
    n = network.n_nodes
    return replace(network, flows=csr_array(5.0 * (1 - np.eye(n))))


def test_too_few_observations_are_refused_in_a_sentence() -> None:
    design = np.column_stack([np.ones(3), np.arange(3.0), np.arange(3.0) ** 2])
    with pytest.raises(ModelError, match="3 observations cannot identify 3 coefficients"):
        fit_indices(Poisson(np.array([1.0, 2.0, 5.0])), [design])


def test_a_poisson_model_with_groups_is_log_group_means() -> None:
    """A saturated Poisson in closed form, one group being empty: its coefficient is minus infinity."""
    group = np.repeat(np.arange(4), 5)
    w = np.array([1, 2, 3, 4, 5, 2, 2, 2, 2, 2, 0, 0, 0, 0, 0, 9, 1, 0, 0, 0], dtype=float)
    design = np.column_stack([np.ones(20), *[(group == g).astype(float) for g in (1, 2, 3)]])
    found = fit_indices(Poisson(w), [design])
    assert found.convergence.converged
    np.testing.assert_allclose(
        found.coefficients[0], [np.log(3), np.log(2 / 3), 0.0, np.log(2 / 3)], rtol=1e-9, atol=1e-12
    )
    np.testing.assert_array_equal(found.separated, group == 2)
    assert found.directions[0][2] < 0
    variance = np.diag(found.covariances[ErrorKind.MODEL])
    np.testing.assert_allclose(variance[[0, 1, 3]], [1 / 15, 1 / 15 + 1 / 10, 1 / 15 + 1 / 10], rtol=1e-9)


def test_two_indices_are_counted_and_certified() -> None:
    w, design = example()
    found = fit_indices(NegativeBinomialQuadratic(w), [design, np.ones((len(w), 1))])
    assert found.rank == 5
    assert found.covariances[ErrorKind.MODEL].shape == (5, 5)
    assert found.convergence.residual <= 1e-8
