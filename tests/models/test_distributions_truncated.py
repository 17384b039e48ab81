"""Zero-truncated laws and the logarithmic series: against scipy, at vanishing means, draws and quantiles."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from steelyard.datasets import Floats
from steelyard.models.distributions import (
    DispersionForm,
    FlowDistribution,
    LogarithmicSeriesLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
    ZeroTruncatedLaw,
)
from steelyard.models.errors import ModelError

MEANS = np.array([0.0, 1e-300, 1e-12, 1e-3, 0.3, 1.0, 4.0, 50.0, 1e4, 1e6])


def negative_binomial(means: Floats, alpha: float) -> ZeroTruncatedLaw:
    return ZeroTruncatedLaw(NegativeBinomialLaw(means, alpha, DispersionForm.QUADRATIC))


LAWS: dict[str, FlowDistribution] = {
    "poisson": ZeroTruncatedLaw(PoissonLaw(MEANS)),
    "nearly poisson": negative_binomial(MEANS, 1e-9),
    "negative binomial": negative_binomial(MEANS, 0.7),
    "very dispersed": negative_binomial(MEANS, 1e4),
    "linear": ZeroTruncatedLaw(NegativeBinomialLaw(MEANS, 3.0, DispersionForm.LINEAR)),
    "logarithmic series": LogarithmicSeriesLinkLaw(
        np.array([-np.inf, -690.0, -20.0, -3.0, 0.0, 1.0, 2.0, 5.0, 10.0, 15.0])
    ),
}


@pytest.mark.parametrize("name", LAWS)
def test_mass_adds_up_to_the_cdf(name: str) -> None:
    law, n = LAWS[name], len(MEANS)
    total = np.zeros(n)
    for count in range(1, 2001):
        total += np.exp(law.log_density(np.full(n, float(count))))
        if count in (1, 2, 30, 2000):
            np.testing.assert_allclose(total, law.cdf(np.full(n, float(count))), rtol=1e-11, atol=1e-290)


@pytest.mark.parametrize("name", LAWS)
def test_quantiles_are_the_smallest(name: str) -> None:
    law = LAWS[name]
    for level in (0.1, 0.5, 0.9, 0.999):
        quantile = law.quantile(level)
        assert (law.cdf(quantile) >= level).all()
        assert ((law.cdf(quantile - 1.0) < level) | (quantile == 1.0)).all()
    top = law.quantile(1.0)
    assert top[0] == 1.0
    assert (top[1:] == np.inf).all()


@pytest.mark.parametrize("name", LAWS)
def test_draws_have_mean_and_variance(name: str) -> None:
    """Within six standard errors of 20 000 draws; where a weight above 1 is rarer than 1e-6 all must be 1."""
    law, size = LAWS[name], 20_000
    draws = law.draw(np.random.default_rng(8), size)
    assert draws.min() == 1.0
    np.testing.assert_array_equal(draws[:, :3][:, 1.0 - law.cdf(np.ones(10))[:3] < 1e-9], 1.0)
    common = law.mean > 1.05
    error = np.maximum(np.sqrt(law.variance / size), draws.std(axis=0) / math.sqrt(size))
    assert (np.abs(draws.mean(axis=0) - law.mean)[common] < 6 * error[common]).all()
    # Shares at three levels say what a moment cannot.
    for level in (0.5, 0.9, 0.99):
        quantile = law.quantile(level)
        share = law.cdf(quantile)
        off = np.abs((draws <= quantile).mean(axis=0) - share)
        assert (off <= 5 * np.sqrt(share * (1 - share) / size) + 1e-3).all()


def test_truncated_masses_agree_with_scipy() -> None:
    w = np.arange(1.0, 60.0)
    for mean in (0.01, 1.0, 30.0):
        poisson = stats.poisson(mean)
        found = ZeroTruncatedLaw(PoissonLaw(np.full(59, mean)))
        np.testing.assert_allclose(
            found.log_density(w), poisson.logpmf(w) - np.log1p(-poisson.pmf(0)), rtol=1e-11
        )
        np.testing.assert_allclose(found.mean, mean / (1 - math.exp(-mean)), rtol=1e-12)
        size = 1 / 0.7
        mixed = stats.nbinom(size, size / (size + mean))
        law = negative_binomial(np.full(59, mean), 0.7)
        np.testing.assert_allclose(law.log_density(w), mixed.logpmf(w) - np.log1p(-mixed.pmf(0)), rtol=1e-11)
        second = (mixed.var() + mixed.mean() ** 2) / (1 - mixed.pmf(0))
        np.testing.assert_allclose(law.variance, second - law.mean**2, rtol=1e-10)


@pytest.mark.parametrize("p", [1e-6, 0.1, 0.9, 0.9999])
def test_logarithmic_series_agrees_with_scipy(p: float) -> None:
    w = np.arange(1.0, 60.0)
    law = LogarithmicSeriesLinkLaw(np.full(59, math.log(p) - math.log1p(-p)))
    outside = stats.logser(p)
    # scipy's own logarithm is of a mass that underflows
    exact = w * math.log(p) - np.log(w) - math.log(-math.log1p(-p))
    np.testing.assert_allclose(law.log_density(w), exact, rtol=1e-11, atol=1e-14)
    np.testing.assert_allclose(law.mean, outside.mean(), rtol=1e-9)
    # mean = -p / ((1 - p) log(1 - p)) and second moment = mean / (1 - p)
    mean = -p / ((1 - p) * math.log1p(-p))
    np.testing.assert_allclose(law.variance, mean / (1 - p) - mean**2, rtol=1e-9, atol=1e-15)


def test_a_vanishing_mean_puts_all_on_one() -> None:
    """P(w > 1) tends to mean / 2 (Poisson) and (1 + alpha) mean / 2 (negative binomial)."""
    mean = np.array([0.0, 1e-300, 1e-8])
    for law, factor in (
        (ZeroTruncatedLaw(PoissonLaw(mean)), 0.5),
        (negative_binomial(mean, 3.0), 2.0),
    ):
        np.testing.assert_allclose(law.mean, 1.0 + factor * mean, rtol=1e-15)
        # Two logarithms of size 690 cancel.
        np.testing.assert_allclose(law.log_density(np.ones(3)), -factor * mean, atol=3e-13)
        np.testing.assert_allclose(1.0 - law.cdf(np.ones(3)), factor * mean, atol=1e-15)
        assert law.log_density(np.full(3, 2.0))[0] == -np.inf


@pytest.mark.parametrize("name", LAWS)
def test_only_whole_weights_from_one_up_are_possible(name: str) -> None:
    law, n = LAWS[name], len(MEANS)
    for weight in (-1.0, 0.0, 0.5, 1.5, np.nan, np.inf):
        assert np.isneginf(law.log_density(np.full(n, weight))).all()
    np.testing.assert_array_equal(law.cdf(np.full(n, 0.9)), 0.0)
    np.testing.assert_array_equal(law.cdf(np.full(n, np.inf)), 1.0)
    np.testing.assert_array_equal(law.link_probability, 1.0)


@pytest.mark.parametrize("index", [np.nan, 701.0, np.inf])
def test_impossible_odds_are_refused(index: float) -> None:
    with pytest.raises(ModelError, match="below 700"):
        LogarithmicSeriesLinkLaw(np.array([0.0, index]))
