"""The likelihoods: derivatives by differences, values against log masses, extreme arguments."""

from __future__ import annotations

from decimal import Decimal, localcontext

import numpy as np
import pytest
from scipy import stats

from steelyard.datasets import Floats
from steelyard.models.binary_likelihoods import Probit
from steelyard.models.gamma_likelihood import Gamma
from steelyard.models.index_likelihood import IndexLikelihood
from steelyard.models.likelihoods import (
    GeometricExcess,
    Logit,
    LogNormal,
    NegativeBinomialQuadratic,
    Poisson,
    least_squares,
)
from steelyard.models.negative_binomial_linear import NegativeBinomialLinear
from steelyard.models.special import negative_binomial_log_mass, poisson_log_mass
from steelyard.models.truncated_likelihoods import (
    LogarithmicSeries,
    TruncatedNegativeBinomial,
    TruncatedPoisson,
)

N = 40
RNG = np.random.default_rng(11)
INDEX = RNG.normal(size=N)
LIKELIHOODS: dict[str, tuple[IndexLikelihood, int]] = {
    "poisson": (Poisson(RNG.poisson(2.0, N).astype(float)), 1),
    "poisson on amounts": (Poisson(RNG.gamma(0.7, 3.0, N) * (RNG.random(N) < 0.7)), 1),
    "logit": (Logit((RNG.random(N) < 0.4).astype(float)), 1),
    "geometric": (GeometricExcess(1.0 + RNG.poisson(3.0, N)), 1),
    "negative binomial": (NegativeBinomialQuadratic(RNG.negative_binomial(2, 0.3, N).astype(float)), 2),
    "lognormal": (LogNormal(RNG.lognormal(1.0, 1.5, N)), 2),
    "probit": (Probit((RNG.random(N) < 0.4).astype(float)), 1),
    "gamma": (Gamma(RNG.gamma(0.7, 3.0, N)), 2),
    "linear negative binomial": (NegativeBinomialLinear(RNG.negative_binomial(2, 0.3, N).astype(float)), 2),
    "truncated poisson": (TruncatedPoisson(1.0 + RNG.poisson(1.0, N)), 1),
    "logarithmic series": (LogarithmicSeries(RNG.logseries(0.8, N).astype(float)), 1),
    "truncated negative binomial": (TruncatedNegativeBinomial(1.0 + RNG.negative_binomial(1, 0.3, N)), 2),
}


def points(name: str) -> list[list[Floats]]:
    """Index values to try: near zero and far out; the second index is the same for all observations."""
    _, m = LIKELIHOODS[name]
    second = [-1.0, 0.7] if m == 2 else [0.0]
    return [
        [scale * INDEX + shift, np.full(N, s)][:m]
        for scale, shift in ((1.0, 0.0), (0.3, 4.0), (0.5, -3.0))
        for s in second
    ]


def one_by_one(likelihood: IndexLikelihood, row: int) -> IndexLikelihood:
    keep = np.zeros(N, dtype=bool)
    keep[row] = True
    return likelihood.restricted(keep)


@pytest.mark.parametrize("name", LIKELIHOODS)
def test_first_derivatives_are_those_of_the_value(name: str) -> None:
    """Fourth-order central differences of each observation's own value; step 1e-3, so errors near 1e-11."""
    likelihood, m = LIKELIHOODS[name]
    h = 1e-3
    for indices in points(name):
        first = likelihood.derivatives(indices).first
        assert first.shape == (m, N)
        for row in range(0, N, 7):
            alone = one_by_one(likelihood, row)
            for i in range(m):
                values = []
                for k in (-2, -1, 1, 2):
                    moved = [x[[row]].copy() for x in indices]
                    moved[i] += k * h
                    values.append(alone.value(moved))
                slope = (values[0] - 8 * values[1] + 8 * values[2] - values[3]) / (12 * h)
                assert first[i, row] == pytest.approx(slope, rel=1e-7, abs=1e-9)


@pytest.mark.parametrize("name", LIKELIHOODS)
def test_second_derivatives_are_those_of_the_first(name: str) -> None:
    likelihood, m = LIKELIHOODS[name]
    h = 1e-3
    for indices in points(name):
        second = likelihood.derivatives(indices).second
        assert second.shape == (m, m, N)
        np.testing.assert_array_equal(second, second.swapaxes(0, 1))
        for j in range(m):
            firsts = []
            for k in (-2, -1, 1, 2):
                moved = [x.copy() for x in indices]
                moved[j] += k * h
                firsts.append(likelihood.derivatives(moved).first)
            slope = (firsts[0] - 8 * firsts[1] + 8 * firsts[2] - firsts[3]) / (12 * h)
            np.testing.assert_allclose(second[:, j], slope, rtol=1e-7, atol=1e-8)


def test_value_differences_are_log_mass_differences() -> None:
    """What the values leave out depends on the response alone."""
    a, b = INDEX + 0.2, 0.5 * INDEX - 0.4
    poisson = LIKELIHOODS["poisson"][0]
    w = poisson.response  # type: ignore[attr-defined]  # the protocol hides it
    expected = (poisson_log_mass(w, np.exp(a)) - poisson_log_mass(w, np.exp(b))).sum()
    assert poisson.value([a]) - poisson.value([b]) == pytest.approx(expected, rel=1e-11)
    nb = LIKELIHOODS["negative binomial"][0]
    w = nb.response  # type: ignore[attr-defined]  # likewise
    one, two = np.full(N, 0.3), np.full(N, -2.0)
    expected = (
        negative_binomial_log_mass(w, np.exp(a), np.exp(-one))
        - negative_binomial_log_mass(w, np.exp(b), np.exp(-two))
    ).sum()
    assert nb.value([a, one]) - nb.value([b, two]) == pytest.approx(expected, rel=1e-11)
    geometric = LIKELIHOODS["geometric"][0]
    w = geometric.response  # type: ignore[attr-defined]  # likewise
    # scipy's geometric law of the number of trials: success probability 1 / (1 + z).
    expected = stats.geom.logpmf(w, 1 / (1 + np.exp(a))).sum()
    assert geometric.value([a]) == pytest.approx(expected, rel=1e-11)
    lognormal = LIKELIHOODS["lognormal"][0]
    w = lognormal.response  # type: ignore[attr-defined]  # likewise
    expected = (
        stats.lognorm.logpdf(w, np.exp(one), scale=np.exp(a))
        - stats.lognorm.logpdf(w, np.exp(two), scale=np.exp(b))
    ).sum()
    assert lognormal.value([a, one]) - lognormal.value([b, two]) == pytest.approx(expected, rel=1e-11)
    logit = LIKELIHOODS["logit"][0]
    w = logit.response  # type: ignore[attr-defined]  # likewise
    assert logit.value([a]) == pytest.approx(stats.bernoulli.logpmf(w, 1 / (1 + np.exp(-a))).sum(), rel=1e-11)


def exact_negative_binomial(w: int, mean: Decimal, r: Decimal) -> tuple[float, ...]:
    """Log mass, and its derivatives in index and log alpha, in 60 digits.

    For a whole count log Gamma(w + r) - log Gamma(r) is a plain sum of log(r + k), k < w.
    """
    product, one_over, one_over_square, factorial = Decimal(1), Decimal(0), Decimal(0), Decimal(1)
    for k in range(w):
        product *= r + k
        factorial *= k + 1
        one_over += 1 / (r + k)
        one_over_square += 1 / (r + k) ** 2
    total = r + mean
    log_zero, log_share = (r / total).ln(), (mean / total).ln()
    value = product.ln() - factorial.ln() + r * log_zero + w * log_share
    by_r = one_over + log_zero + 1 - (r + w) / total
    by_r_2 = -one_over_square + 1 / r - 2 / total + (r + w) / total**2
    first = (r * (w - mean) / total, -r * by_r)
    second = (-mean * r * (r + w) / total**2, -r * mean * (w - mean) / total**2, r * by_r + r**2 * by_r_2)
    return tuple(float(x) for x in (value, *first, *second))


@pytest.mark.parametrize("alpha", [1e-9, 1e-6, 1e-3, 0.99e-2, 1.01e-2, 1.0, 1e3, 1e6])
@pytest.mark.parametrize(
    ("w", "mean"), [(0, 1e-6), (0, 3.0), (1, 0.01), (4, 3.0), (4, 4.0), (900, 1e3), (3000, 10.0)]
)
def test_negative_binomial_at_extremes(w: int, mean: float, alpha: float) -> None:
    """Against 60-digit arithmetic.

    Derivatives by log alpha are r times differences of digammas, each good to eps: at the r = 100 where a series
    takes over that is 1e-13.
    """
    likelihood = NegativeBinomialQuadratic(np.array([float(w)]))
    indices = [np.array([np.log(mean)]), np.array([np.log(alpha)])]
    with localcontext() as context:
        context.prec = 60
        exact = exact_negative_binomial(
            w, Decimal(float(indices[0][0])).exp(), (-Decimal(float(indices[1][0]))).exp()
        )
    found = likelihood.derivatives(indices)
    got = (
        likelihood.value(indices),
        found.first[0, 0],
        found.first[1, 0],
        found.second[0, 0, 0],
        found.second[0, 1, 0],
        found.second[1, 1, 0],
    )
    floor = 1e-13 * (abs(w - mean) + 1)
    np.testing.assert_allclose(got, exact, rtol=1e-11, atol=floor)


@pytest.mark.parametrize("scale", [1e-3, 1.0, 1e6, 1e12])
def test_poisson_value_keeps_its_digits(scale: float) -> None:
    """Differences of the value at weights up to 1e12, against 40-digit arithmetic: what a line search must see.

    The mean is exp(index), off by |index| eps of itself, which moves the value by that times |w - mean|; small
    weights may also lose eps times w |index|.
    """
    w = (
        np.rint(scale * np.array([0.5, 1.0, 1.7, 2.0]))
        if scale >= 1
        else scale * np.array([0.5, 1.0, 1.7, 2.0])
    )
    index = np.log(scale) + np.array([0.3, 1e-5, 0.5, 0.69])
    moved = index + np.array([1e-7, -2e-6, 3e-7, 1e-6])
    exact = _poisson_value(w, moved) - _poisson_value(w, index)
    value = Poisson(w).value
    bound = 8e-16 * float((np.abs(w - np.exp(index)) * (1 + np.abs(index))).sum())
    bound += 4e-16 * float((np.minimum(w, 1000.0) * (1 + np.abs(index))).sum())
    bound += 4e-16 * abs(value([index])) + 1e-15 * abs(float(exact))
    assert abs((value([moved]) - value([index])) - float(exact)) <= bound


def _poisson_value(w: Floats, index: Floats) -> Decimal:
    """Sum of w index - exp(index) in 40 digits."""
    with localcontext() as context:
        context.prec = 40
        pairs = [(Decimal(a), Decimal(b)) for a, b in zip(w.tolist(), index.tolist(), strict=True)]
        return sum((a * b - b.exp() for a, b in pairs), Decimal(0))


def test_logit_gradient_does_not_round_to_zero() -> None:
    """At an index of 50 the probability rounds to 1; the gradient of a link there is e^-50 all the same."""
    found = Logit(np.array([1.0, 0.0])).derivatives([np.array([50.0, -50.0])])
    np.testing.assert_allclose(found.first[0], [np.exp(-50.0), -np.exp(-50.0)], rtol=1e-14)
    np.testing.assert_allclose(found.second[0, 0], -np.exp(-50.0), rtol=1e-14)


@pytest.mark.parametrize("name", LIKELIHOODS)
def test_starts_are_finite(name: str) -> None:
    likelihood, m = LIKELIHOODS[name]
    designs = [np.column_stack([np.ones(N), INDEX]), np.ones((N, 1))][:m]
    start = likelihood.start(designs)
    assert start.shape == (2 + (m - 1),)
    indices = [designs[0] @ start[:2], np.full(N, start[-1])][:m]
    assert np.isfinite(likelihood.value(indices))


def test_weighted_least_squares_in_closed_form() -> None:
    """With a constant alone it is the weighted mean."""
    values, weights = np.array([1.0, 2.0, 6.0]), np.array([1.0, 1.0, 2.0])
    assert least_squares(np.ones((3, 1)), values, weights)[0] == pytest.approx(15.0 / 4.0)
    assert least_squares(np.ones((3, 1)), values)[0] == pytest.approx(3.0)
