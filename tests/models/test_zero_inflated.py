"""Zero-inflated counts: derivatives, recovery, agreement with statsmodels, and every limit by name."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize, special, stats
from statsmodels.discrete.count_model import ZeroInflatedPoisson

from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import DispersionForm, NegativeBinomialLaw, PoissonLaw, ZeroInflatedLaw
from steelyard.models.econometric.inflation_limits import gain_of_certain_zeros
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.econometric.zero_inflated_fit import (
    ZeroInflatedFit,
    dispersion_estimate,
    fit_zero_inflated,
    inflation_index,
    part_estimates,
)
from steelyard.models.estimates import ErrorKind, EstimatePart, Status
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.zero_inflated_likelihood import ZeroInflated

COUNT, INFLATION, ALPHA = np.array([1.0, 0.7, -0.4]), np.array([-0.3, 0.9]), 0.8


def simulated(n: int, seed: int, *, dispersed: bool) -> tuple[Floats, list[Floats]]:
    """Counts from the law itself, with their designs."""
    rng = np.random.default_rng(seed)
    x, z = rng.normal(size=(n, 2)), rng.normal(size=n)
    designs = [np.column_stack([np.ones(n), x]), np.column_stack([np.ones(n), z])]
    mean = np.exp(designs[0] @ COUNT)
    around = rng.gamma(1 / ALPHA, ALPHA, size=n) if dispersed else 1.0
    counts = rng.poisson(mean * around).astype(float)
    counts[rng.random(n) < special.expit(designs[1] @ INFLATION)] = 0.0
    return counts, designs


def log_mass(w: Floats, designs: list[Floats], point: Floats, *, dispersed: bool) -> float:
    """The same likelihood from scipy's laws."""
    k, q = designs[0].shape[1], designs[1].shape[1]
    mean, odds = np.exp(designs[0] @ point[:k]), designs[1] @ point[k : k + q]
    if dispersed:
        size = np.exp(-point[-1])
        count = stats.nbinom.logpmf(w, size, size / (size + mean))
    else:
        count = stats.poisson.logpmf(w, mean)
    count = count + special.log_expit(-odds)
    return float(np.where(w == 0, np.logaddexp(special.log_expit(odds), count), count).sum())


def coefficients(fit: ZeroInflatedFit) -> Floats:
    return np.concatenate(fit.found.coefficients)


@pytest.mark.parametrize("dispersed", [False, True])
@pytest.mark.parametrize("shift", [-6.0, 0.0, 3.0])
def test_derivatives_are_those_of_the_value(dispersed: bool, shift: float) -> None:
    """Each observation's own value and first derivatives, by central differences with step 1e-5."""
    w = np.array([0.0, 0.0, 0.0, 1.0, 2.0, 30.0])
    never = np.array([False, False, True, False, True, False])
    rng = np.random.default_rng(5)
    indices = [rng.normal(size=6) + shift, 2 * rng.normal(size=6), np.full(6, -0.4)][: 2 + dispersed]
    whole = ZeroInflated(w, never, dispersed)
    found = whole.derivatives(indices)
    h = 1e-5
    for a in range(len(indices)):
        up = [i + h * (b == a) for b, i in enumerate(indices)]
        down = [i - h * (b == a) for b, i in enumerate(indices)]
        np.testing.assert_allclose(
            found.second[a],
            (whole.derivatives(up).first - whole.derivatives(down).first) / (2 * h),
            atol=3e-7,
            rtol=1e-6,
        )
        for row in range(6):
            one = whole.restricted(slice(row, row + 1))
            change = one.value([i[row : row + 1] for i in up]) - one.value([i[row : row + 1] for i in down])
            assert found.first[a, row] == pytest.approx(change / (2 * h), abs=2e-8, rel=1e-7)


@pytest.mark.parametrize("dispersed", [False, True])
def test_the_truth_is_recovered(dispersed: bool) -> None:
    """Each estimate within 4 of its own standard errors of the truth, 20,000 observations; one fixed draw."""
    w, designs = simulated(20_000, 3, dispersed=dispersed)
    fit = fit_zero_inflated(w, designs, dispersed=dispersed)
    truth = np.concatenate([COUNT, INFLATION, [np.log(ALPHA)] * dispersed])
    errors = np.sqrt(np.diag(fit.found.covariances[ErrorKind.MODEL]))
    assert fit.convergence.converged
    assert (np.abs(coefficients(fit) - truth) < 4 * errors).all()
    assert (errors < 0.1).all()


@pytest.mark.parametrize("dispersed", [False, True])
def test_no_search_with_scipys_laws_finds_more(dispersed: bool) -> None:
    w, designs = simulated(600, 8, dispersed=dispersed)
    fit = fit_zero_inflated(w, designs, dispersed=dispersed)
    assert fit.log_likelihood == pytest.approx(
        log_mass(w, designs, coefficients(fit), dispersed=dispersed), rel=1e-12
    )
    rng = np.random.default_rng(1)
    for _ in range(5):
        start = coefficients(fit) + rng.normal(size=len(coefficients(fit)))
        found = optimize.minimize(
            lambda p: -log_mass(w, designs, p, dispersed=dispersed), start, method="BFGS"
        )
        assert -found.fun <= fit.log_likelihood + 1e-7


def test_errors_are_those_of_the_whole_information() -> None:
    """Model errors against the numerical Hessian of scipy's likelihood (central differences, step 1e-4).

    The cross block between the parts is not zero, and leaving it out would change them.
    """
    w, designs = simulated(800, 4, dispersed=True)
    fit = fit_zero_inflated(w, designs, dispersed=True)
    at, k, h = coefficients(fit), len(coefficients(fit)), 1e-4
    steps = h * np.eye(k)

    def value(p: Floats) -> float:
        return log_mass(w, designs, p, dispersed=True)

    hessian = np.array(
        [
            [value(at + a + b) - value(at + a - b) - value(at - a + b) + value(at - a - b) for b in steps]
            for a in steps
        ]
    ) / (4 * h * h)
    np.testing.assert_allclose(
        np.sqrt(np.diag(fit.found.covariances[ErrorKind.MODEL])),
        np.sqrt(np.diag(np.linalg.inv(-hessian))),
        rtol=1e-4,
    )
    apart = np.linalg.inv(-hessian[3:5, 3:5])
    assert abs(np.sqrt(apart[0, 0]) / np.sqrt(np.linalg.inv(-hessian)[3, 3]) - 1) > 0.02


def test_statsmodels_is_not_above() -> None:
    w, designs = simulated(1500, 9, dispersed=False)
    outside = ZeroInflatedPoisson(w, designs[0], exog_infl=designs[1]).fit(disp=0, maxiter=500, gtol=1e-8)
    fit = fit_zero_inflated(w, designs, dispersed=False)
    assert fit.log_likelihood >= outside.llf - 1e-8 * abs(outside.llf)
    np.testing.assert_allclose(
        coefficients(fit), np.concatenate([outside.params[2:], outside.params[:2]]), atol=1e-4
    )


def test_scale_and_order_do_not_matter() -> None:
    """Columns in other units, one far from zero, and the observations in another order."""
    w, designs = simulated(900, 6, dispersed=True)
    rng = np.random.default_rng(0)
    pairs = NodePairs(rng.integers(0, 15, 900), rng.integers(15, 30, 900), 30)
    plain = fit_zero_inflated(w, designs, pairs, dispersed=True)
    order = rng.permutation(900)
    scale, shift = np.array([1.0, 1e6, 1e-6]), 1e3
    other = [designs[0] * scale, designs[1].copy()]
    other[1][:, 1] += shift
    moved = NodePairs(pairs.origin[order], pairs.destination[order], 30)
    found = fit_zero_inflated(w[order], [d[order] for d in other], moved, dispersed=True)
    assert found.log_likelihood == pytest.approx(plain.log_likelihood, rel=1e-12)
    np.testing.assert_allclose(found.found.coefficients[0] * scale, plain.found.coefficients[0], rtol=1e-7)
    assert found.found.coefficients[1][1] == pytest.approx(plain.found.coefficients[1][1], rel=1e-7)
    for kind in ErrorKind:
        slopes = [np.sqrt(np.diag(f.found.covariances[kind]))[[1, 2, 4, 5]] for f in (found, plain)]
        np.testing.assert_allclose(slopes[0] * np.array([1e6, 1e-6, 1.0, 1.0]), slopes[1], rtol=1e-6)


# --- limits ---------------------------------------------------------------------------------------------------


def test_nothing_inflated_is_the_plain_law() -> None:
    """Counts that are less often zero than a Poisson: the share that is inflated falls to 0."""
    rng = np.random.default_rng(2)
    w = rng.binomial(8, 0.3, size=400).astype(float)
    designs = [np.column_stack([np.ones(400), rng.normal(size=400)])] * 2
    fit = fit_zero_inflated(w, designs, dispersed=False)
    plain = fit_indices(Poisson(w), [designs[0]])
    assert not fit.inflated
    assert fit.found.rank == plain.rank
    np.testing.assert_allclose(fit.found.coefficients[0], plain.coefficients[0], rtol=1e-10)
    assert "nothing is inflated" in fit.convergence.message
    rows = part_estimates(fit, ("x",), ("x",))
    constant = rows.row("constant", EstimatePart.INFLATION)
    assert (constant.value, constant.status) == (-np.inf, Status.BOUNDARY)
    assert rows.row("x", EstimatePart.INFLATION).status is Status.FIXED
    index = inflation_index(fit, ("x",))
    assert index.directions == ((-1.0, 0.0),)


def test_alpha_at_its_edge_is_the_zero_inflated_poisson() -> None:
    """Counts that are less spread than a Poisson once the inflated zeros are taken out."""
    rng = np.random.default_rng(4)
    w = np.where(rng.random(500) < 0.4, 0, rng.binomial(20, 0.3, size=500)).astype(float)
    designs = [np.ones((500, 1)), np.ones((500, 1))]
    fit = fit_zero_inflated(w, designs, dispersed=True)
    poisson = fit_zero_inflated(w, designs, dispersed=False)
    assert fit.alpha == 0.0
    assert fit.log_likelihood == pytest.approx(poisson.log_likelihood, rel=1e-13)
    assert "alpha at its edge 0" in fit.convergence.message
    assert dispersion_estimate(fit).status is Status.BOUNDARY


def test_never_below_the_plain_law() -> None:
    """Over 40 draws of plain negative binomial counts, where inflation has nothing to explain."""
    for seed in range(40):
        rng = np.random.default_rng(seed)
        x = rng.normal(size=120)
        design = np.column_stack([np.ones(120), x])
        w = rng.negative_binomial(1, 1 / (1 + np.exp(0.5 + x))).astype(float)
        fit = fit_zero_inflated(w, [design, design], dispersed=True)
        plain = fit_negative_binomial(w, design)
        alpha = float(np.exp(plain.coefficients[1][0])) if len(plain.coefficients) > 1 else 0.0
        law = NegativeBinomialLaw(np.exp(design @ plain.coefficients[0]), alpha, DispersionForm.QUADRATIC)
        assert fit.log_likelihood >= float(law.log_density(w).sum()) - 1e-9


def test_zeros_in_any_case_are_told_by_a_covariate() -> None:
    """All flows are zero where a dummy is 1, and no other dyad says anything about the dummy.

    The count part already sends their mean to zero, so that they are fixed there and counted.
    """
    w, designs = simulated(600, 11, dispersed=False)
    dummy = (np.arange(600) < 60).astype(float)
    w[dummy == 1] = 0.0
    both = [np.column_stack([d, dummy]) for d in designs]
    fit = fit_zero_inflated(w, both, dispersed=False)
    rest = dummy == 0
    plain = fit_zero_inflated(w[rest], [d[rest] for d in designs], dispersed=False)
    assert fit.convergence.converged
    assert "60 separated dyads" in fit.convergence.message
    assert fit.log_likelihood == pytest.approx(plain.log_likelihood, rel=1e-12)
    assert fit.found.rank == plain.found.rank


def test_no_inflation_on_some_dyads_is_a_limit() -> None:
    """Where a dummy is 1 every dyad has a flow: there the log odds of inflation fall without end."""
    w, designs = simulated(600, 12, dispersed=False)
    dummy = ((w > 0) & (np.arange(600) % 3 == 0)).astype(float)
    both = [designs[0], np.column_stack([designs[1], dummy])]
    fit = fit_zero_inflated(w, both, dispersed=False)
    assert fit.convergence.converged
    assert (
        f"inflation of {int(dummy.sum())} dyads fixed at its limit (0 always zero)" in fit.convergence.message
    )
    rows = part_estimates(fit, ("a", "b"), ("z", "dummy"))
    assert rows.row("dummy", EstimatePart.INFLATION).value == -np.inf
    assert rows.row("z", EstimatePart.INFLATION).status is Status.FREE
    # A large finite coefficient comes close from below, and no closer than the limit.
    point = coefficients(fit)
    below = [log_mass(w, both, np.append(point[:-1], far), dispersed=False) for far in (-5.0, -10.0, -20.0)]
    assert below[0] < below[1] < below[2] <= fit.log_likelihood + 1e-9
    assert below[2] == pytest.approx(fit.log_likelihood, abs=1e-5)


def test_zeros_that_can_be_singled_out() -> None:
    """Counts less spread than a Poisson, and three zeros beyond all flows along an inflation covariate.

    Making those three certain gains minus the sum of their log probabilities, so that the plain law is no maximum;
    with the constant alone there is nothing to single out.
    """
    rng = np.random.default_rng(2)
    n = 300
    w = rng.binomial(8, 0.4, size=n).astype(float)
    z = rng.uniform(-1.0, 1.0, size=n)
    w[:3], z[:3] = 0.0, [5.0, 5.5, 6.0]
    design = np.ones((n, 1))
    inflation = np.column_stack([np.ones(n), z])
    fit = fit_zero_inflated(w, [design, inflation], dispersed=False)
    assert not fit.convergence.converged
    assert "3 of them to always zero" in fit.convergence.message
    assert not fit.found.covariances
    constant_only = fit_zero_inflated(w, [design, design], dispersed=False)
    assert constant_only.convergence.converged
    assert not constant_only.inflated
    log_zero = np.full(n, -float(np.exp(constant_only.found.coefficients[0][0])))
    assert gain_of_certain_zeros(inflation, log_zero, w) == (3, pytest.approx(-3 * log_zero[0]))
    assert gain_of_certain_zeros(design, log_zero, w) == (0, 0.0)
    assert fit.log_likelihood == pytest.approx(constant_only.log_likelihood - 3 * log_zero[0], abs=0.6)


def test_limits_that_others_pay_for_are_refused_by_name() -> None:
    """Four flows among 190 dyads and four covariates: several choices of what is always zero, none certified."""
    rng = np.random.default_rng(27)
    refused = 0
    for _ in range(12):
        design = np.column_stack([np.ones(190), rng.normal(size=(190, 3))])
        w = np.zeros(190)
        w[rng.choice(190, size=6, replace=False)] = rng.integers(1, 30, size=6)
        fit = fit_zero_inflated(w, [design, design], dispersed=True)
        if not fit.convergence.converged:
            refused += 1
            assert fit.convergence.message
            assert not fit.found.covariances
    assert refused > 0, "the cases must show a refusal"


@pytest.mark.parametrize("dispersed", [False, True])
def test_no_zeros_and_no_flows(dispersed: bool) -> None:
    rng = np.random.default_rng(1)
    design = np.column_stack([np.ones(50), rng.normal(size=50)])
    every = fit_zero_inflated(1.0 + rng.poisson(3.0, 50), [design, design], dispersed=dispersed)
    assert every.convergence.converged
    assert not every.inflated
    none = fit_zero_inflated(np.zeros(50), [design, design], dispersed=dispersed)
    assert none.convergence.converged
    assert "all 50 dyads separated" in none.convergence.message
    assert none.found.rank == 0


# --- the law ----------------------------------------------------------------------------------------------------


def test_law_against_its_definition() -> None:
    """P(0), P(w), mean and variance from the two stages, and the limits of the log odds."""
    odds = np.array([-np.inf, -40.0, 0.3, np.inf])
    law = ZeroInflatedLaw(odds, PoissonLaw(np.full(4, 2.5)))
    pi = special.expit(odds)
    np.testing.assert_allclose(np.exp(law.log_density(np.zeros(4))), pi + (1 - pi) * np.exp(-2.5), rtol=1e-14)
    with np.errstate(divide="ignore"):
        expected = np.log1p(-pi) + stats.poisson.logpmf(3, 2.5)
    np.testing.assert_allclose(law.log_density(np.full(4, 3.0)), expected, rtol=1e-13)
    np.testing.assert_allclose(law.mean, (1 - pi) * 2.5, rtol=1e-14)
    second = (1 - pi) * (2.5 + 2.5**2)
    np.testing.assert_allclose(law.variance, second - law.mean**2, rtol=1e-13, atol=1e-15)
    assert law.quantile(1.0).tolist() == [np.inf, np.inf, np.inf, 0.0]
