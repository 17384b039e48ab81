"""Log masses and tails on large flows, against exact arithmetic.

References: the textbook formulas in `decimal` at 60 digits (log Gamma by Stirling's series with exact
Bernoulli numbers after shifting the argument above 80, checked below against factorials), and sums of exact
ratios of neighbouring masses. Nothing here comes from the code under test.
"""

from __future__ import annotations

import math
from decimal import Decimal, localcontext
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from scipy import stats

from steelyard.models.special import (
    deviance_term,
    log_difference,
    negative_binomial_log_mass,
    negative_binomial_log_zero,
    poisson_log_mass,
    stirling_error,
)
from steelyard.models.tails import TEMME_COEFFICIENTS, negative_binomial_cdf, poisson_cdf

TWO_PI = Decimal("6.28318530717958647692528676655900576839433879875021164194988918")
DIGITS = 60
RELATIVE = 1e-12  # of the log mass; the promise of the design is 1e-10


def bernoulli_numbers(count: int) -> list[Fraction]:
    """B_0, B_1, ... by the defining recursion."""
    numbers = [Fraction(1)]
    for m in range(1, count):
        numbers.append(-sum(math.comb(m + 1, k) * numbers[k] for k in range(m)) / Fraction(m + 1))
    return numbers


BERNOULLI = bernoulli_numbers(42)


def exact_log_gamma(x: Decimal) -> Decimal:
    """log Gamma(x) for x > 0, to about 50 digits."""
    shift = Decimal(1)
    while x < 80:
        shift *= x
        x += 1
    series = (x - Decimal("0.5")) * x.ln() - x + TWO_PI.ln() / 2
    for k in range(1, 21):
        b = BERNOULLI[2 * k]
        series += Decimal(b.numerator) / (Decimal(b.denominator) * 2 * k * (2 * k - 1) * x ** (2 * k - 1))
    return series - shift.ln()


def exact_poisson(w: float, mean: float) -> float:
    with localcontext() as context:
        context.prec = DIGITS
        m, x = Decimal(mean), Decimal(w)
        return float(x * m.ln() - m - exact_log_gamma(x + 1))


def exact_negative_binomial(w: float, mean: float, size: float) -> float:
    with localcontext() as context:
        context.prec = DIGITS
        m, x, r = Decimal(mean), Decimal(w), Decimal(size)
        combinations = exact_log_gamma(x + r) - exact_log_gamma(r) - exact_log_gamma(x + 1)
        return float(combinations + r * (r / (r + m)).ln() + x * (m / (r + m)).ln())


def one(value: float) -> np.ndarray:
    return np.array([value], dtype=np.float64)


weights = st.one_of(st.integers(0, 50), st.integers(0, 10**12)).map(float)
means = st.floats(-12.0, 12.0).map(lambda power: 10.0**power)
sizes = st.floats(-8.0, 15.0).map(lambda power: 10.0**power)
standard = st.floats(-8.0, 8.0)


@pytest.mark.parametrize("n", [1, 5, 20, 170])
def test_the_reference_knows_factorials(n: int) -> None:
    with localcontext() as context:
        context.prec = DIGITS
        assert abs(exact_log_gamma(Decimal(n + 1)) - Decimal(math.factorial(n)).ln()) < Decimal("1e-40")


def test_stirling_error_of_factorials() -> None:
    x = np.array([1.0, 2.0, 7.0, 15.0, 16.0, 17.0, 100.0, 1e6])
    with localcontext() as context:
        context.prec = DIGITS
        exact = [
            exact_log_gamma(Decimal(v) + 1)
            - ((Decimal(v) + Decimal("0.5")) * Decimal(v).ln() - Decimal(v) + TWO_PI.ln() / 2)
            for v in x
        ]
    np.testing.assert_allclose(stirling_error(x), [float(v) for v in exact], rtol=0, atol=1e-14)


@settings(max_examples=100, deadline=None)
@given(x=means, factor=st.floats(-3.0, 3.0), close=st.booleans())
def test_deviance_term(x: float, factor: float, close: bool) -> None:
    m = x * (1.0 + 1e-7 * factor) if close else x * 10.0**factor
    if m == x:
        assert deviance_term(one(x), one(m))[0] == 0.0
        return
    with localcontext() as context:
        context.prec = DIGITS
        dx, dm = Decimal(x), Decimal(m)
        exact = float(dx * (dx / dm).ln() + dm - dx)
    assert deviance_term(one(x), one(m))[0] == pytest.approx(exact, rel=1e-12, abs=1e-300)


def test_deviance_term_at_zero() -> None:
    np.testing.assert_array_equal(
        deviance_term(np.array([0.0, 0.0, 3.0]), np.array([2.0, 0.0, 0.0])), [2, 0, np.inf]
    )


@settings(max_examples=200, deadline=None)
@given(w=weights, mean=means)
@example(w=1e12, mean=1e12)
@example(w=1e12, mean=1.0)
@example(w=0.0, mean=1e12)
@example(w=1.0, mean=1e-12)
def test_poisson_log_mass(w: float, mean: float) -> None:
    assert poisson_log_mass(one(w), one(mean))[0] == pytest.approx(exact_poisson(w, mean), rel=RELATIVE)


@settings(max_examples=200, deadline=None)
@given(mean=st.floats(2.0, 12.0).map(lambda power: 10.0**power), z=standard)
def test_poisson_log_mass_near_its_mean(mean: float, z: float) -> None:
    """Where plain log Gamma differences lose all digits: the terms are 1e13, the answer about -15."""
    w = max(math.floor(mean + z * math.sqrt(mean)), 0.0)
    assert poisson_log_mass(one(w), one(mean))[0] == pytest.approx(exact_poisson(w, mean), rel=RELATIVE)


@settings(max_examples=300, deadline=None)
@given(w=weights, mean=means, size=sizes)
@example(w=1e12, mean=1e12, size=1e15)
@example(w=1e12, mean=1e12, size=1e-8)
@example(w=1.0, mean=1e12, size=1e-8)
@example(w=3.0, mean=3.0, size=1e15)
def test_negative_binomial_log_mass(w: float, mean: float, size: float) -> None:
    exact = exact_negative_binomial(w, mean, size)
    assert negative_binomial_log_mass(one(w), one(mean), one(size))[0] == pytest.approx(exact, rel=RELATIVE)


@settings(max_examples=300, deadline=None)
@given(mean=st.floats(2.0, 12.0).map(lambda power: 10.0**power), size=sizes, z=standard)
def test_negative_binomial_log_mass_near_its_mean(mean: float, size: float, z: float) -> None:
    w = min(max(math.floor(mean + z * math.sqrt(mean + mean * mean / size)), 0.0), 1e15)
    exact = exact_negative_binomial(w, mean, size)
    assert negative_binomial_log_mass(one(w), one(mean), one(size))[0] == pytest.approx(exact, rel=RELATIVE)


@pytest.mark.parametrize("size", [1e20, 1e30, 1e200, np.inf])
def test_negative_binomial_becomes_poisson(size: float) -> None:
    mean = np.array([1e-9, 0.3, 7.0, 1e3, 1e8])
    for w in (np.zeros(5), np.floor(mean), np.floor(mean + 3 * np.sqrt(mean) + 1)):
        nb = negative_binomial_log_mass(w, mean, np.full(5, size))
        first_order = ((w - mean) ** 2 - w) / (2 * size)  # of the difference, in 1 / size
        np.testing.assert_allclose(nb, poisson_log_mass(w, mean) + first_order, rtol=1e-13)


def test_small_masses_agree_with_scipy() -> None:
    w, mean, size = (a.ravel() for a in np.meshgrid(np.arange(30.0), [0.1, 2.0, 20.0], [0.3, 1.0, 9.0]))
    np.testing.assert_allclose(poisson_log_mass(w, mean), stats.poisson.logpmf(w, mean), rtol=1e-12)
    expected = stats.nbinom.logpmf(w, size, size / (size + mean))
    np.testing.assert_allclose(negative_binomial_log_mass(w, mean, size), expected, rtol=1e-11)


@pytest.mark.parametrize("size", [1e-300, 1e-8, 0.5, 1e8, 1e300, np.inf])
def test_probability_of_zero(size: float) -> None:
    mean = np.array([0.0, 1e-30, 1e-3, 1.0, 1e12])
    with localcontext() as context:
        context.prec = 400  # 1 + mean / size needs all the digits between them
        if np.isinf(size):
            exact = [-m for m in mean]
        else:
            r = Decimal(size)
            exact = [float(-r * (1 + Decimal(m) / r).ln()) for m in mean]
    np.testing.assert_allclose(negative_binomial_log_zero(mean, np.full(5, size)), exact, rtol=1e-13, atol=0)


@pytest.mark.parametrize("bad", [-1.0, 0.5, 1e6 + 0.5, np.nan, np.inf, -np.inf])
def test_impossible_weights(bad: float) -> None:
    mean = np.array([0.0, 2.0, 1e6])
    w = np.full(3, bad)
    assert (poisson_log_mass(w, mean) == -np.inf).all()
    assert (negative_binomial_log_mass(w, mean, np.array([1.0, 2.0, np.inf])) == -np.inf).all()


def test_mean_of_zero_allows_only_zero() -> None:
    w, zero = np.array([0.0, 1.0, 1e12]), np.zeros(3)
    for log_mass in (poisson_log_mass(w, zero), negative_binomial_log_mass(w, zero, np.zeros(3))):
        np.testing.assert_array_equal(log_mass, [0.0, -np.inf, -np.inf])


def test_log_difference() -> None:
    larger = np.array([0.0, -1e5, 0.0, 2.0, -np.inf, 0.0])
    smaller = np.array([-1e-12, -1e5 - 1, -800.0, 2.0, -np.inf, -np.inf])
    # log(1e-12 - 5e-25); log(1 - 1/e) beside -1e5; -exp(-800) underflows; equal; both impossible
    expected = [math.log(1e-12), -1e5 + math.log(1 - math.exp(-1)), 0.0, -np.inf, -np.inf, 0.0]
    np.testing.assert_allclose(log_difference(larger, smaller), expected, rtol=1e-11)


def test_temme_coefficients_follow_their_recursion() -> None:
    """Digital Library of Mathematical Functions 8.12, in fractions: from eta^2 / 2 = mu - log(1 + mu)."""
    mu = [Fraction(0), Fraction(1)]  # mu as a series in eta; eta (1 + mu) = mu mu'
    for k in range(2, 20):
        known = sum(mu[i] * (k + 1 - i) * mu[k + 1 - i] for i in range(2, k))
        mu.append((mu[k - 1] - known) / (k + 1))
    rows = [[(k + 2) * mu[k + 2] - (k == 0) for k in range(18)]]
    for order, stirling in ((1, Fraction(-1, 12)), (2, Fraction(1, 288))):
        last = rows[-1]
        rows.append([stirling * rows[0][n] + (n + 2) * last[n + 2] for n in range(len(last) - 2)])
        assert len(rows) == order + 1
    for ours, exact in zip(TEMME_COEFFICIENTS, rows, strict=True):
        np.testing.assert_allclose(ours, [float(c) for c in exact[: len(ours)]], rtol=1e-14)


def tails_by_ratios(w: float, mean: float, size: float, terms: int) -> tuple[float, float]:
    """P(W <= w) and P(W > w): sums of masses over the one at w, from P(k)/P(k-1) = q (k - 1 + r) / k."""
    q, p = mean / (mean + size), size / (mean + size)
    if np.isinf(size):
        up = np.arange(1.0, terms)
        above = np.log1p((mean - w - up) / (w + up))
        down = np.arange(0.0, min(terms, w))
        below = np.log((w - down) / mean)
    else:
        up = np.arange(1.0, terms)
        above = np.log1p(((size - 1) * q - p * (w + up)) / (w + up))
        down = np.arange(0.0, min(terms, w))
        below = np.log((w - down) / ((w - down + size - 1) * q))
    upper, lower = np.exp(np.cumsum(above)).sum(), 1.0 + np.exp(np.cumsum(below)).sum()
    return lower / (lower + upper), upper / (lower + upper)


@pytest.mark.parametrize("mean", [1e2, 9.9e4, 1.01e5, 1e6, 1e8])
@pytest.mark.parametrize("z", [-7.0, -1.0, 0.0, 2.0, 5.0])
def test_poisson_cdf_at_large_means(mean: float, z: float) -> None:
    """scipy's incomplete gamma function is off by 1e-7 at a mean of 1e8 and z = 5."""
    w = math.floor(mean + z * math.sqrt(mean))
    lower, upper = tails_by_ratios(w, mean, np.inf, int(20 * math.sqrt(mean)) + 200)
    got = poisson_cdf(one(w), one(mean))[0]
    assert got == pytest.approx(lower, rel=1e-11)
    assert 1.0 - got == pytest.approx(upper, rel=1e-9, abs=1e-15)


@pytest.mark.parametrize(("mean", "size"), [(50.0, 0.2), (1e4, 3.0), (1e6, 1e9), (1e8, 1e7), (1e9, 1e12)])
@pytest.mark.parametrize("z", [-5.0, -0.5, 1.0, 5.0])
def test_negative_binomial_cdf_at_large_means(mean: float, size: float, z: float) -> None:
    deviation = math.sqrt(mean + mean * mean / size)
    w = max(math.floor(mean + z * deviation), 0)
    lower, _ = tails_by_ratios(w, mean, size, min(int(60 * deviation) + 200, 2_000_000))
    assert negative_binomial_cdf(one(w), one(mean), one(size))[0] == pytest.approx(lower, rel=1e-9)


@pytest.mark.parametrize("size", [1e-2, 1.0, 1e6, 1e15, 1e25, np.inf])
def test_cdf_steps_by_the_mass_at_the_largest_weights(size: float) -> None:
    """Over a thousandth of a deviation the mass is smooth, so Simpson's rule gives the step of the cdf."""
    mean = 1e12
    deviation = math.sqrt(mean + mean * mean / size)
    step = math.ceil(deviation * 1e-3 / 4) * 4
    centre = math.floor(mean)
    points = centre + np.arange(-2, 3) * (step // 4)
    many, sizes_ = np.full(5, mean), np.full(5, size)
    mass = np.exp(negative_binomial_log_mass(points, many, sizes_))
    # Simpson over (centre - step/2, centre + step/2], ends half-counted
    simpson = (step / 12) * (mass[0] + 4 * mass[1] + 2 * mass[2] + 4 * mass[3] + mass[4]) + (
        mass[4] - mass[0]
    ) / 2
    cdf = negative_binomial_cdf(points, many, sizes_)
    assert cdf[4] - cdf[0] == pytest.approx(simpson, rel=1e-8)


def test_cdf_outside_the_support() -> None:
    w = np.array([-np.inf, -1.0, -0.5, np.inf, 0.5])
    mean = np.full(5, 2.0)
    for size in (1.0, np.inf):
        at_zero = math.exp(negative_binomial_log_zero(one(2.0), one(size))[0])
        got = negative_binomial_cdf(w, mean, np.full(5, size))
        np.testing.assert_allclose(got, [0, 0, 0, 1, at_zero], rtol=1e-14)
    np.testing.assert_array_equal(poisson_cdf(np.array([0.0, 5.0, -1.0]), np.zeros(3)), [1, 1, 0])
