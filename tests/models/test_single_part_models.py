"""Probit, gamma, truncated and form 1 models: against statsmodels, at their edges, under changes of scale and order."""

from __future__ import annotations

from math import inf

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats
from scipy.sparse import csr_array
from statsmodels.discrete.truncated_model import TruncatedLFNegativeBinomialP, TruncatedLFPoisson

from steelyard.datasets import (
    DistanceCovariate,
    Dyads,
    End,
    Floats,
    FlowNetwork,
    NodeCovariate,
    Provenance,
    Transform,
    dataset_registry,
)
from steelyard.models import ErrorKind, Status
from steelyard.models.binary_likelihoods import Probit
from steelyard.models.distributions import (
    DispersionForm,
    LogarithmicSeriesLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
    ZeroTruncatedLaw,
)
from steelyard.models.econometric.gamma import GammaModel
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel, fit_negative_binomial
from steelyard.models.econometric.probit import ProbitModel
from steelyard.models.econometric.truncated_negative_binomial import TruncatedNegativeBinomialModel
from steelyard.models.errors import ModelError
from steelyard.models.gamma_likelihood import Gamma
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.truncated_fit import TruncatedForm, fit_truncated_negative_binomial
from steelyard.models.truncated_likelihoods import TruncatedPoisson

AIR = {
    "origin": NodeCovariate("population", End.ORIGIN, Transform.LOG),
    "destination": NodeCovariate("population", End.DESTINATION, Transform.LOG),
    "distance": DistanceCovariate("latitude", "longitude", Transform.LOG),
}


@pytest.fixture(scope="module")
def air() -> Dyads:
    return Dyads(dataset_registry().get("state-air-2008").load(), AIR)


def errors(found: IndexFit) -> Floats:
    return np.sqrt(np.diag(found.covariances[ErrorKind.MODEL]))


def made_up(n: int, seed: int, scale: float = 1.0) -> tuple[Floats, Floats]:
    """A design with a constant, and an index of spread about one on it."""
    rng = np.random.default_rng(seed)
    x = rng.normal(size=(n, 2)) * np.array([scale, 1.0 / scale])
    design = np.column_stack([np.ones(n), x])
    return design, design @ np.array([1.0, 0.8 / scale, -0.5 * scale])


def invented(flows: Floats, size: Floats) -> FlowNetwork:
    return FlowNetwork(
        labels=tuple(f"place {i}" for i in range(len(size))),
        flows=csr_array(flows),
        directed=True,
        unit=1.0,
        node_columns={"size": size},
        dyad_columns={},
        provenance=Provenance("invented"),
    )


def truncated_total(w: Floats, index: Floats, alpha: float) -> float:
    """Log-likelihood by scipy's masses."""
    size = 1.0 / alpha
    law = stats.nbinom(size, size / (size + np.exp(index)))
    return float((law.logpmf(w) - np.log(law.sf(0))).sum())


def test_probit_against_statsmodels(air: Dyads) -> None:
    design, links = air.design(air.covariates), air.links.astype(float)
    found = fit_indices(Probit(links), [design])
    outside = sm.Probit(links, design).fit(disp=0, method="newton", tol=1e-12)
    assert found.convergence.converged
    assert (np.abs(found.coefficients[0] - outside.params) / errors(found)).max() < 1e-6
    np.testing.assert_allclose(errors(found), outside.bse, rtol=1e-7)
    assert Probit(links).value([design @ found.coefficients[0]]) == pytest.approx(outside.llf, rel=1e-11)


def test_gamma_against_statsmodels(air: Dyads) -> None:
    """Slopes of the GLM; alpha from the likelihood equation log a - digamma(a) = mean deviance, solved by scipy."""
    linked = air.links
    design, w = air.design(air.covariates)[linked], air.weights[linked]
    found = fit_indices(Gamma(w), [design, np.ones((len(w), 1))])
    family = sm.families.Gamma(link=sm.families.links.Log())
    outside = sm.GLM(w, design, family=family).fit(tol=1e-13, maxiter=300)
    assert found.convergence.converged
    assert (np.abs(found.coefficients[0] - outside.params) / errors(found)[: design.shape[1]]).max() < 1e-6
    scale = np.exp(found.coefficients[1][0])
    fixed = stats.gamma(1 / scale, scale=np.exp(design @ outside.params) * scale)
    ours = stats.gamma(1 / scale, scale=np.exp(design @ found.coefficients[0]) * scale).logpdf(w).sum()
    assert ours >= fixed.logpdf(w).sum() - 1e-9 * abs(ours)
    for other in (0.99 * scale, 1.01 * scale):
        moved = stats.gamma(1 / other, scale=np.exp(design @ found.coefficients[0]) * other)
        assert moved.logpdf(w).sum() < ours


def test_gamma_of_a_constant_in_closed_form() -> None:
    """With a constant alone the mean is the average, and scipy's fit has the shape."""
    w = np.random.default_rng(2).gamma(0.7, 3.0, 400)
    found = fit_indices(Gamma(w), [np.ones((400, 1)), np.ones((400, 1))])
    shape, _, _ = stats.gamma.fit(w, floc=0)
    assert np.exp(found.coefficients[0][0]) == pytest.approx(w.mean(), rel=1e-10)
    assert np.exp(-found.coefficients[1][0]) == pytest.approx(shape, rel=1e-6)


@pytest.mark.parametrize("shape", [1e-3, 1e-2, 1.0, 1e3, 1e6, 1e9])
def test_gamma_shapes_from_tiny_to_huge(shape: float) -> None:
    """Certified at every shape; the estimate lies within five standard errors of the truth."""
    design, index = made_up(1500, 3, 1e6)
    rng = np.random.default_rng(4)
    logs = np.log(rng.standard_gamma(shape + 1.0, 1500)) - rng.standard_exponential(1500) / shape
    w = np.exp(np.clip(index + logs - np.log(shape), -700.0, 700.0))
    found = fit_indices(Gamma(w), [design, np.ones((1500, 1))])
    assert found.convergence.converged, found.convergence.message
    if shape > 2e-3:  # below, a fifth of the weights lie beyond the smallest float
        off = np.append(found.coefficients[0], found.coefficients[1]) - [1.0, 8e-7, -5e5, -np.log(shape)]
        assert (np.abs(off) < 5 * errors(found)).all()


def test_gamma_refuses_flows_without_spread() -> None:
    size = np.array([1.0, 2.0, 3.0, 5.0, 8.0, 13.0])
    flows = np.outer(size, size)
    np.fill_diagonal(flows, 0.0)
    network = invented(flows, size)
    known = {
        "out": NodeCovariate("size", End.ORIGIN, Transform.LOG),
        "in": NodeCovariate("size", End.DESTINATION, Transform.LOG),
    }
    with pytest.raises(ModelError, match="explain all 30 positive flows exactly, so alpha is 0"):
        GammaModel(covariates=("out", "in")).fit(Dyads(network, known))


def test_truncated_poisson_against_statsmodels() -> None:
    design, index = made_up(800, 5)
    w = ZeroTruncatedLaw(PoissonLaw(np.exp(0.5 * index - 1))).draw(np.random.default_rng(6), 1)[0]
    found = fit_indices(TruncatedPoisson(w), [design])
    outside = TruncatedLFPoisson(w, design).fit(method="bfgs", maxiter=1000, gtol=1e-9, disp=0)
    ours = ZeroTruncatedLaw(PoissonLaw(np.exp(design @ found.coefficients[0]))).log_density(w).sum()
    assert found.convergence.converged
    assert ours >= outside.llf - 1e-9 * abs(outside.llf)
    assert (np.abs(found.coefficients[0] - outside.params) / errors(found)).max() < 1e-4


@pytest.mark.parametrize("alpha", [0.3, 2.0])
def test_truncated_negative_binomial_against_statsmodels(alpha: float) -> None:
    design, index = made_up(800, 7)
    law = ZeroTruncatedLaw(NegativeBinomialLaw(np.exp(index), alpha, DispersionForm.QUADRATIC))
    w = law.draw(np.random.default_rng(8), 1)[0]
    fitted = fit_truncated_negative_binomial(w, design)
    assert fitted.form is TruncatedForm.INSIDE
    found = fitted.found
    assert found.convergence.converged
    ours = truncated_total(w, design @ found.coefficients[0], float(np.exp(found.coefficients[1][0])))
    outside = TruncatedLFNegativeBinomialP(w, design)
    start = np.append(found.coefficients[0], np.exp(found.coefficients[1][0])) * 1.01
    best = outside.fit(start_params=start, method="bfgs", maxiter=1000, gtol=1e-8, disp=0)
    assert ours >= best.llf - 1e-9 * abs(best.llf)
    assert (np.abs(found.coefficients[0] - best.params[:3]) / errors(found)[:3]).max() < 1e-3
    assert np.exp(found.coefficients[1][0]) == pytest.approx(best.params[3], rel=1e-3)


def test_truncated_edges() -> None:
    """Underdispersed weights end at the Poisson, weights of a logarithmic series at its own fit, both named."""
    design = np.column_stack([np.ones(40), np.tile([0.0, 1.0], 20)])
    under = np.tile([4.0, 5.0, 4.0, 6.0], 10)
    fitted = fit_truncated_negative_binomial(under, design)
    assert fitted.form is TruncatedForm.POISSON
    # Each half has its own mean, so each meets the truncated-Poisson equation of its average, 4 and 5.5.
    means = np.exp(fitted.found.coefficients[0] @ np.array([[1.0, 1.0], [0.0, 1.0]]))
    np.testing.assert_allclose(means / -np.expm1(-means), [4.0, 5.5], rtol=1e-9)
    # Far more ones, and far larger weights, than any finite alpha gives.
    heavy = np.where(np.arange(400) % 10 == 0, 10.0 ** (np.arange(400) % 7), 1.0)
    fitted = fit_truncated_negative_binomial(heavy, np.ones((400, 1)))
    assert fitted.form is TruncatedForm.LOGARITHMIC
    assert fitted.found.convergence.converged
    # The likelihood equation of a constant: the mean of the law is the average.
    z = np.exp(fitted.found.coefficients[0][0])
    assert z / np.log1p(z) == pytest.approx(heavy.mean(), rel=1e-9)
    edge = LogarithmicSeriesLinkLaw(np.full(400, np.log(z))).log_density(heavy).sum()
    for alpha in (1.0, 10.0, 100.0, 1e4):
        best = max(truncated_total(heavy, np.full(400, i), alpha) for i in np.linspace(-12.0, 14.0, 400))
        assert best < edge


def test_the_logarithmic_edge_is_told() -> None:
    n = 25
    rng = np.random.default_rng(9)
    flows = LogarithmicSeriesLinkLaw(np.full(n * n, 4.0)).draw(rng, 1).reshape(n, n)
    flows[rng.random((n, n)) < 0.5] = 0.0
    flows[0, 1:] = 1e6
    np.fill_diagonal(flows, 0.0)
    network = invented(flows, rng.random(n))
    known = {"size": NodeCovariate("size", End.BOTH, Transform.NONE)}
    fitted = TruncatedNegativeBinomialModel(covariates=("size",)).fit(Dyads(network, known))
    assert fitted.convergence.converged
    assert "alpha at its edge infinity" in fitted.convergence.message
    row = fitted.estimates.row("alpha")
    assert (row.value, row.status) == (inf, Status.BOUNDARY)
    assert "alpha times the mean" in fitted.estimates.row("constant").note
    assert fitted.n_parameters == 2


@pytest.mark.parametrize("seed", range(6))
def test_truncated_fits_are_certified_and_not_below_the_truth(seed: int) -> None:
    """Covariates of scale 1e-6 to 1e6, weights to 1e9, alpha from nearly 0 to huge."""
    scale, alpha = 10.0 ** (6 - 2.4 * seed), 10.0 ** (2 * seed - 6)
    design, index = made_up(600, 10 + seed, scale)
    mean = np.exp(index * 1.5 + 5.0 * (seed % 3))
    law = ZeroTruncatedLaw(NegativeBinomialLaw(mean, alpha, DispersionForm.QUADRATIC))
    w = law.draw(np.random.default_rng(seed), 1)[0]
    fitted = fit_truncated_negative_binomial(w, design)
    assert fitted.found.convergence.converged, fitted.found.convergence.message
    reached = design @ fitted.found.coefficients[0]
    fit_law: ZeroTruncatedLaw | LogarithmicSeriesLinkLaw
    if fitted.form is TruncatedForm.INSIDE:
        size = float(np.exp(fitted.found.coefficients[1][0]))
        fit_law = ZeroTruncatedLaw(NegativeBinomialLaw(np.exp(reached), size, DispersionForm.QUADRATIC))
    elif fitted.form is TruncatedForm.POISSON:
        fit_law = ZeroTruncatedLaw(PoissonLaw(np.exp(reached)))
    else:
        fit_law = LogarithmicSeriesLinkLaw(reached)
    assert fit_law.log_density(w).sum() >= law.log_density(w).sum()


def test_linear_negative_binomial_against_statsmodels(air: Dyads) -> None:
    design, w = air.design(air.covariates), air.counts / 1000
    w = np.rint(w)
    found = fit_negative_binomial(w, design, form=DispersionForm.LINEAR)
    assert found.convergence.converged
    alpha = float(np.exp(found.coefficients[1][0]))
    size = np.exp(design @ found.coefficients[0]) / alpha
    ours = float(stats.nbinom.logpmf(w, size, 1.0 / (1.0 + alpha)).sum())
    outside = sm.NegativeBinomial(w, design, loglike_method="nb1")
    start = np.append(found.coefficients[0], alpha) * 1.001
    best = outside.fit(start_params=start, method="bfgs", maxiter=2000, disp=0, warn_convergence=False)
    assert ours >= best.llf - 1e-9 * abs(best.llf)
    assert ours == pytest.approx(best.llf, rel=1e-6)


@pytest.mark.parametrize("form", list(DispersionForm))
@pytest.mark.parametrize("seed", [12, 17, 22, 26])
def test_large_nearly_poisson_counts_are_certified(form: DispersionForm, seed: int) -> None:
    """Poisson draws around means of up to 1e6: the fit is certified, and not below the truth.

    With these seeds alpha is tiny but not 0, which a start from a log fit does not find.
    """
    design, index = made_up(400, 40 + seed)
    law = PoissonLaw(np.exp(index + 8.0))
    w = law.draw(np.random.default_rng(seed), 1)[0]
    found = fit_negative_binomial(w, design, form=form)
    assert found.convergence.converged, found.convergence.message
    alpha = float(np.exp(found.coefficients[1][0])) if len(found.coefficients) == 2 else 0.0
    fitted = NegativeBinomialLaw(np.exp(design @ found.coefficients[0]), alpha, form)
    assert fitted.log_density(w).sum() >= law.log_density(w).sum()


def test_linear_negative_binomial_edge() -> None:
    """Underdispersed counts: the Poisson fit, alpha at 0."""
    w = np.tile([1.0, 2.0, 1.0, 2.0], 15)
    found = fit_negative_binomial(w, np.ones((60, 1)), form=DispersionForm.LINEAR)
    assert len(found.coefficients) == 1
    assert np.exp(found.coefficients[0][0]) == pytest.approx(1.5)


def test_forms_differ_and_others_are_refused(air: Dyads) -> None:
    names = tuple(air.covariates)
    variances = [NegativeBinomialModel(names, form=f).fit(air).distribution(air).variance for f in (1, 2)]
    law = NegativeBinomialModel(names, form=1).fit(air)
    mean = law.expected_weight(air)
    np.testing.assert_allclose(variances[0], mean * (1.0 + law.alpha))
    assert not np.allclose(variances[0], variances[1])
    with pytest.raises(ModelError, match=r"must be 1 .* or 2 .*; got 3"):
        NegativeBinomialModel(names, form=3)


@pytest.mark.parametrize("case", ["probit", "gamma", "truncated", "linear"])
def test_scale_and_order_do_not_matter(case: str) -> None:
    """Covariates in other units turn slopes into those units; dyads in another order change nothing."""
    design, index = made_up(300, 20)
    rng = np.random.default_rng(21)
    mixed = NegativeBinomialLaw(np.exp(index), 0.8, DispersionForm.QUADRATIC)
    responses = {
        "probit": (rng.random(300) < stats.norm.cdf(index)).astype(float),
        "gamma": np.exp(index) * rng.gamma(1.3, 1 / 1.3, 300),
        "truncated": ZeroTruncatedLaw(mixed).draw(rng, 1)[0],
        "linear": mixed.draw(rng, 1)[0],
    }

    def fitted(w: Floats, x: Floats) -> IndexFit:
        if case == "probit":
            return fit_indices(Probit(w), [x])
        if case == "gamma":
            return fit_indices(Gamma(w), [x, np.ones((len(w), 1))])
        if case == "truncated":
            return fit_truncated_negative_binomial(w, x).found
        return fit_negative_binomial(w, x, form=DispersionForm.LINEAR)

    w = responses[case]
    plain = fitted(w, design)
    units = np.array([1.0, 1e6, 1e-6])
    np.testing.assert_allclose(
        fitted(w, design * units).coefficients[0] * units, plain.coefficients[0], rtol=1e-7
    )
    order = rng.permutation(300)
    np.testing.assert_allclose(
        fitted(w[order], design[order]).coefficients[0], plain.coefficients[0], rtol=1e-7
    )


def test_probit_law_keeps_both_tails(air: Dyads) -> None:
    """From log p and log(1 - p), as scipy has them for the normal law, out to where p is 1 to all digits."""
    fitted = ProbitModel(covariates=("distance",)).fit(air)
    index = fitted.index.on(air)
    law = fitted.distribution(air)
    np.testing.assert_allclose(law.log_link_probability, stats.norm.logcdf(index), rtol=1e-12)
    np.testing.assert_allclose(law.log_no_link_probability, stats.norm.logsf(index), rtol=1e-12)
