"""The gamma law: both tails against exact sums, narrow intervals, quantiles and draws."""

from __future__ import annotations

import math
from decimal import Decimal, localcontext

import numpy as np
import pytest
from scipy import stats

from steelyard.models.distributions import CellLaw, GammaLinkLaw
from steelyard.models.errors import ModelError
from steelyard.models.tails import log_gamma_tails

SHAPES = [1e-3, 0.1, 0.5, 1.0, 7.0, 300.0, 2e4, 9.9e4, 1.1e5, 1e7, 1e9]


def exact_tails(shape: int, ratio: float) -> tuple[float, float]:
    """Log tails for a whole shape a in closed form: Q(a, x) = exp(-x) times the sum of x^k / k! over k < a."""
    with localcontext() as context:
        context.prec = 700
        x = shape * Decimal(ratio)
        term = total = Decimal(1)
        for k in range(1, shape):
            term = term * x / k
            total += term
        upper = total * (-x).exp()
        return float((1 - upper).ln()), float(upper.ln())


@pytest.mark.parametrize(
    ("shape", "ratio"),
    [
        (1, 1e-9),
        (1, 700.0),
        (3, 1e-100),
        (3, 400.0),
        (50, 1e-5),
        (50, 0.5),
        (50, 1.0),
        (50, 1.7),
        (50, 30.0),
        (2000, 0.6),
        (2000, 0.97),
        (2000, 1.03),
        (2000, 1.9),
        (110_000, 0.95),
        (110_000, 0.999),
        (110_000, 1.0),
        (110_000, 1.01),
        (110_000, 1.1),
    ],
)
def test_tails_of_whole_shapes(shape: int, ratio: float) -> None:
    found = [float(t[0]) for t in log_gamma_tails(np.array([float(shape)]), np.array([ratio]))]
    exact = exact_tails(shape, ratio)
    np.testing.assert_allclose(min(found), min(exact), rtol=3e-14)
    # The log of the larger tail is minus the smaller one, whose own log of up to -1000 is good to its rounding.
    np.testing.assert_allclose(max(found), max(exact), rtol=1e-12, atol=1e-300)


def test_tails_at_the_ends() -> None:
    lower, upper = log_gamma_tails(np.array([2.0, 2.0, 1e7, 1e7]), np.array([0.0, np.inf, 1e-200, 1e200]))
    np.testing.assert_array_equal(lower[[0, 1, 3]], [-np.inf, 0.0, 0.0])
    np.testing.assert_array_equal(upper[[0, 1, 2]], [0.0, -np.inf, 0.0])
    # log of x^a exp(-x) / Gamma(a + 1), of which the rest of the series is 1 to all digits
    expected = 1e7 * (math.log(1e7) - 200 * math.log(10)) - math.lgamma(1e7 + 1)
    assert lower[2] == pytest.approx(expected, rel=1e-12)
    assert upper[3] < -1e200


@pytest.mark.parametrize("shape", [1e-3, 0.1, 0.5, 1.0, 7.0, 300.0])
def test_density_and_cdf_agree_with_scipy(shape: float) -> None:
    w = 10.0 ** np.linspace(-5, 3.5, 40)
    law = GammaLinkLaw(np.full(40, 30.0), 1.0 / shape)
    outside = stats.gamma(shape, scale=30.0 / shape)
    np.testing.assert_allclose(law.log_density(w), outside.logpdf(w), rtol=1e-11, atol=1e-11)
    np.testing.assert_allclose(law.cdf(w), outside.cdf(w), rtol=1e-11, atol=1e-300)


@pytest.mark.parametrize("shape", SHAPES)
def test_intervals_add_up(shape: float) -> None:
    """An interval is the sum of its halves, whichever way each was worked out: narrow, wide, in either tail."""
    mean = 1e6
    deviations = np.array([-30.0, -5.0, -0.5, 0.0, 2.0, 30.0])
    centre = np.maximum(mean * (1.0 + deviations / math.sqrt(shape)), 1e-3) if shape > 1 else 10.0**deviations
    for width in (1e-6, 1e-3, 0.1, 0.5, 3.0):
        law = GammaLinkLaw(np.full(6, mean), 1.0 / shape)
        upper = centre * (1.0 + width / math.sqrt(max(shape, 1.0)))
        middle = np.sqrt(centre * upper)
        whole = law.log_interval(centre, upper)
        halves = np.logaddexp(law.log_interval(centre, middle), law.log_interval(middle, upper))
        # The rounding of the middle counts shape times the distance from the mean.
        np.testing.assert_allclose(halves, whole, rtol=1e-11, atol=1e-11)


@pytest.mark.parametrize("shape", [0.5, 40.0, 1e6, 1e9])
def test_narrow_intervals_are_the_density(shape: float) -> None:
    mean = np.full(5, 1e5)
    w = mean * (1.0 + np.array([-4.0, -1.0, 0.0, 1.0, 6.0]) / math.sqrt(max(shape, 50.0)))
    width = 1e-6 * w / math.sqrt(shape)
    law = GammaLinkLaw(mean, 1.0 / shape)
    expected = law.log_density(w) + np.log(width)
    # Differences of neighbouring floats leave six digits of the width.
    np.testing.assert_allclose(law.log_interval(w - width / 2, w + width / 2), expected, atol=1e-4)


@pytest.mark.parametrize("shape", SHAPES)
def test_quantiles_are_the_smallest(shape: float) -> None:
    law = GammaLinkLaw(np.array([1e-3, 1.0, 5e8]), 1.0 / shape)
    for level in (0.01, 0.5, 0.99):
        quantile = law.quantile(level)
        assert (law.cdf(quantile) >= level).all()
        below = np.nextafter(quantile, 0.0)
        assert ((law.cdf(below) < level) | (quantile == 0.0)).all()
    np.testing.assert_array_equal(law.quantile(1.0), np.inf)


@pytest.mark.parametrize("shape", [0.05, 1.0, 30.0, 1e9])
def test_draws(shape: float) -> None:
    """Mean, and the share below the median, within five standard errors of 20 000 draws."""
    law = GammaLinkLaw(np.array([0.1, 1e6]), 1.0 / shape)
    draws = law.draw(np.random.default_rng(3), 20_000)
    error = np.sqrt(law.variance / 20_000)
    assert (np.abs(draws.mean(axis=0) - law.mean) < 5 * error).all()
    below = (draws <= law.quantile(0.5)).mean(axis=0)
    assert (np.abs(below - 0.5) < 5 * 0.5 / math.sqrt(20_000)).all()


def test_no_draw_is_zero() -> None:
    """At a shape of 1e-3 half of all weights are below 1e-300; a link has a weight all the same."""
    draws = GammaLinkLaw(np.ones(3), 1e3).draw(np.random.default_rng(1), 1000)
    assert draws.min() > 0.0


def test_cells_add_up_to_one() -> None:
    law = CellLaw(GammaLinkLaw(np.array([3.0, 0.2, 20.0]), 1.5))
    total = sum(np.exp(law.log_density(np.full(3, float(c)))) for c in range(1, 2000))
    np.testing.assert_allclose(total, 1.0, rtol=1e-12)


@pytest.mark.parametrize(("mean", "dispersion"), [(0.0, 1.0), (1.0, 0.0), (np.inf, 1.0), (1.0, np.nan)])
def test_impossible_parameters_are_refused(mean: float, dispersion: float) -> None:
    with pytest.raises(ModelError, match="finite, > 0"):
        GammaLinkLaw(np.array([mean]), dispersion)
