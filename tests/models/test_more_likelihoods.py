"""Probit, gamma, truncated and form 1 likelihoods: values against scipy, extremes against exact arithmetic."""

from __future__ import annotations

from decimal import Decimal, localcontext

import numpy as np
import pytest
from scipy import stats

from steelyard.models.binary_likelihoods import Probit, mills_ratio
from steelyard.models.gamma_likelihood import Gamma, gamma_shape_terms
from steelyard.models.index_likelihood import IndexLikelihood, fit_indices
from steelyard.models.negative_binomial_linear import NegativeBinomialLinear
from steelyard.models.truncated_likelihoods import (
    LogarithmicSeries,
    TruncatedNegativeBinomial,
    TruncatedPoisson,
    truncated_poisson_excess,
)

RNG = np.random.default_rng(5)
N = 60
INDEX = RNG.normal(size=N)
COUNTS = 1.0 + RNG.negative_binomial(1, 0.2, N)


def test_probit_value_is_the_log_probability() -> None:
    links = (RNG.random(N) < 0.5).astype(float)
    expected = stats.bernoulli.logpmf(links, stats.norm.cdf(INDEX)).sum()
    assert Probit(links).value([INDEX]) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("z", [-1e8, -1e4, -300.0, -38.0, -20.5, -20.0, -19.5, -8.0, -4.0])
def test_mills_ratio_in_the_lower_tail(z: float) -> None:
    """Laplace's continued fraction Phi(-x) / phi(x) = 1 / (x + 1 / (x + 2 / (x + ...))) in 60 digits."""
    with localcontext() as context:
        context.prec = 60
        x = -Decimal(z)
        tail = x
        for k in range(4000, 0, -1):
            tail = x + k / tail
        ratio, rest = float(tail), float(tail - x)
    found = [float(v[0]) for v in mills_ratio(np.array([z]))]
    # Just above -20 the sum is a difference of terms 400 times as large.
    np.testing.assert_allclose(found, [ratio, rest], rtol=2e-13)


def test_mills_ratio_above_zero_is_the_plain_quotient() -> None:
    z = np.linspace(-3.0, 8.0, 45)
    ratio, rest = mills_ratio(z)
    np.testing.assert_allclose(ratio, stats.norm.pdf(z) / stats.norm.cdf(z), rtol=1e-13)
    np.testing.assert_allclose(rest, ratio + z, rtol=1e-15)
    np.testing.assert_array_equal(mills_ratio(np.array([60.0]))[0], 0.0)


def test_gamma_value_differences_are_log_density_differences() -> None:
    w = RNG.gamma(0.6, 4.0, N)
    points = [(INDEX, -0.4), (0.3 * INDEX + 1.0, 1.2)]
    ours = [Gamma(w).value([i, np.full(N, a)]) for i, a in points]
    exact = [stats.gamma.logpdf(w, np.exp(-a), scale=np.exp(i + a)).sum() for i, a in points]
    assert ours[0] - ours[1] == pytest.approx(exact[0] - exact[1], rel=1e-12)


@pytest.mark.parametrize("shape", [1e-3, 0.3, 5.0, 19.99, 20.01, 1e3, 1e6, 1e9])
def test_gamma_shape_terms(shape: float) -> None:
    """Against the digamma and trigamma functions at shape + 200, in 50 digits, brought down by their recurrences."""
    with localcontext() as context:
        context.prec = 50
        a = Decimal(shape)
        x = a + 200
        psi = x.ln() - 1 / (2 * x) - 1 / (12 * x**2) + 1 / (120 * x**4) - 1 / (252 * x**6) + 1 / (240 * x**8)
        psi_1 = 1 / x + 1 / (2 * x**2) + 1 / (6 * x**3) - 1 / (30 * x**5) + 1 / (42 * x**7) - 1 / (30 * x**9)
        psi -= sum(1 / (a + k) for k in range(200))
        psi_1 += sum(1 / (a + k) ** 2 for k in range(200))
        g = a.ln() - psi
        exact = (float(a * g), float(a * g + a - a * a * psi_1))
    found = gamma_shape_terms(shape)
    assert found[0] == pytest.approx(exact[0], rel=1e-13)
    # Below the series the second is a difference of terms of size shape.
    assert found[1] == pytest.approx(exact[1], rel=1e-11 if shape < 20 else 1e-10, abs=1e-15)


def test_truncated_values_are_log_masses() -> None:
    poisson = stats.poisson(np.exp(INDEX))
    expected = (poisson.logpmf(COUNTS) - np.log(-np.expm1(-np.exp(INDEX)))).sum()
    assert TruncatedPoisson(COUNTS).value([INDEX]) == pytest.approx(expected, rel=1e-12)
    size = np.exp(-0.7)
    law = stats.nbinom(size, size / (size + np.exp(INDEX)))
    expected = (law.logpmf(COUNTS) - np.log1p(-law.pmf(0))).sum()
    found = TruncatedNegativeBinomial(COUNTS).value([INDEX, np.full(N, 0.7)])
    assert found == pytest.approx(expected, rel=1e-12)
    series = stats.logser.logpmf(COUNTS, 1.0 / (1.0 + np.exp(-INDEX))).sum()
    assert LogarithmicSeries(COUNTS).value([INDEX]) == pytest.approx(series, rel=1e-12)


def test_linear_negative_binomial_values_are_log_masses() -> None:
    w = COUNTS - 1.0
    size = np.exp(INDEX - 0.7)
    expected = stats.nbinom.logpmf(w, size, size / (size + np.exp(INDEX))).sum()
    assert NegativeBinomialLinear(w).value([INDEX, np.full(N, 0.7)]) == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("mean", [1e-300, 1e-9, 1e-3, 0.0999, 0.1001, 2.0, 50.0, 1e9])
def test_truncated_poisson_excess(mean: float) -> None:
    with localcontext() as context:
        context.prec = 400
        m = Decimal(mean)
        exact = float(m / (1 - (-m).exp()) - 1)
    assert float(truncated_poisson_excess(np.array([mean]))[0]) == pytest.approx(exact, rel=1e-13)


def test_truncated_laws_meet_their_limits() -> None:
    """Tiny alpha is the truncated Poisson; huge alpha with alpha x mean fixed, the logarithmic series.

    The gaps are of the order of alpha w^2 and of the size times log w.
    """
    near = TruncatedNegativeBinomial(COUNTS).value([INDEX, np.full(N, np.log(1e-12))])
    assert near == pytest.approx(TruncatedPoisson(COUNTS).value([INDEX]), abs=1e-7)
    far = TruncatedNegativeBinomial(COUNTS).value([INDEX - np.log(1e12), np.full(N, np.log(1e12))])
    assert far == pytest.approx(LogarithmicSeries(COUNTS).value([INDEX]), abs=1e-8)


@pytest.mark.parametrize("law", [TruncatedPoisson, LogarithmicSeries])
def test_a_weight_of_one_costs_nothing_far_below(
    law: type[TruncatedPoisson] | type[LogarithmicSeries],
) -> None:
    """At an index of -800 the mean underflows; one is certain, and its derivatives vanish."""
    likelihood: IndexLikelihood = law(np.array([1.0, 1.0]))
    index = [np.array([-800.0, -40.0])]
    assert likelihood.value(index) == pytest.approx(0.0, abs=1e-13)
    found = likelihood.derivatives(index)
    np.testing.assert_allclose(found.first, 0.0, atol=1e-15)
    np.testing.assert_allclose(found.second, 0.0, atol=1e-15)


def test_probit_separates_as_a_logit_does() -> None:
    """Links exactly where the covariate is 1: its slope is infinite, and the rest is fitted in closed form."""
    x = np.repeat([0.0, 1.0], 10)
    links = np.where(x == 1, 1.0, np.tile([0.0, 1.0, 0.0, 0.0, 0.0], 4))
    found = fit_indices(Probit(links), [np.column_stack([np.ones(20), x])])
    assert found.convergence.converged
    assert int(found.separated.sum()) == 10
    assert found.directions[0][1] > 0
    assert found.coefficients[0][0] == pytest.approx(stats.norm.ppf(0.2), rel=1e-9)
    assert "10 separated dyads" in found.convergence.message


def test_ones_separate_the_truncated_poisson() -> None:
    """All weights are 1 where the covariate is 1: the mean there is 0 before truncation."""
    x = np.repeat([0.0, 1.0], 10)
    w = np.where(x == 1, 1.0, np.tile([1.0, 2.0, 3.0, 1.0, 5.0], 4))
    found = fit_indices(TruncatedPoisson(w), [np.column_stack([np.ones(20), x])])
    assert found.convergence.converged
    assert int(found.separated.sum()) == 10
    assert found.directions[0][1] < 0
    # The likelihood equation of a constant: the truncated mean is the average of the rest, 12 / 5.
    mean = np.exp(found.coefficients[0][0])
    assert mean / -np.expm1(-mean) == pytest.approx(2.4, rel=1e-9)
