"""Laws of links and counts, and the hurdle: closed forms, boundaries and large flows."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from steelyard.models.distributions import (
    DispersionForm,
    FlowDistribution,
    GeometricLinkLaw,
    HurdleLaw,
    LinkLaw,
    LognormalLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
)
from steelyard.models.errors import ModelError

QUADRATIC, LINEAR = DispersionForm.QUADRATIC, DispersionForm.LINEAR


def test_links_keep_their_digits_at_extreme_odds() -> None:
    law = LinkLaw.from_log_odds(np.array([-800.0, -50.0, 0.0, 50.0, 800.0, -np.inf, np.inf]))
    # log p = eta - log(1 + e^eta): at -50 it is -50 - e^-50 = -50 to all digits, at 50 it is -e^-50
    log_p = [-800.0, -50.0, -math.log(2), -math.exp(-50.0), 0.0, -np.inf, 0.0]
    log_q = [0.0, -math.exp(-50.0), -math.log(2), -50.0, -800.0, 0.0, -np.inf]
    np.testing.assert_allclose(law.log_density(np.ones(7)), log_p, rtol=1e-14)
    np.testing.assert_allclose(law.log_density(np.zeros(7)), log_q, rtol=1e-14)
    np.testing.assert_array_equal(law.link_probability[-2:], [0.0, 1.0])
    np.testing.assert_allclose(law.variance[[1, 3]], math.exp(-50.0), rtol=1e-13)


def test_links_from_probabilities() -> None:
    p = np.array([0.0, 1e-300, 0.2, 0.5, 1 - 1e-12, 1.0])
    law = LinkLaw.from_probability(p)
    np.testing.assert_allclose(law.link_probability, p, rtol=1e-12)
    np.testing.assert_allclose(law.log_density(np.zeros(6))[:-1], np.log1p(-p[:-1]), rtol=1e-12)
    assert law.log_density(np.zeros(6))[-1] == -np.inf
    for bad in (-0.1, 1.1, np.nan):
        with pytest.raises(ModelError, match="Link probability"):
            LinkLaw.from_probability(np.array([0.5, bad]))
    with pytest.raises(ModelError, match="Log odds"):
        LinkLaw.from_log_odds(np.array([np.nan]))


@settings(max_examples=60, deadline=None)
@given(mean=st.floats(1e-6, 1e9), w=st.integers(0, 10**9))
def test_negative_binomial_with_alpha_one_is_geometric_from_zero(mean: float, w: int) -> None:
    """P(w) = y^w (1 - y), y = mean / (1 + mean): the link law of w + 1 with excess `mean`."""
    law = NegativeBinomialLaw(np.array([mean]), 1.0, QUADRATIC)
    closed = -w * math.log1p(1.0 / mean) - math.log1p(mean)
    assert law.log_density(np.array([float(w)]))[0] == pytest.approx(closed, rel=1e-12)
    geometric = GeometricLinkLaw(np.array([mean]))
    assert geometric.log_density(np.array([w + 1.0]))[0] == pytest.approx(closed, rel=1e-12)


def test_negative_binomial_without_dispersion_is_poisson() -> None:
    mean = np.array([0.0, 1e-6, 2.0, 1e4, 1e12])
    w = np.array([0.0, 1.0, 0.0, 1.01e4, 1e12 + 2e6])
    for form in DispersionForm:
        law, poisson = NegativeBinomialLaw(mean, 0.0, form), PoissonLaw(mean)
        np.testing.assert_allclose(law.log_density(w), poisson.log_density(w), rtol=1e-14)
        np.testing.assert_array_equal(law.cdf(w), poisson.cdf(w))
        np.testing.assert_array_equal(law.quantile(0.3), poisson.quantile(0.3))
        np.testing.assert_array_equal(law.variance, mean)


def test_the_two_forms_meet_where_their_variances_do() -> None:
    mean, w = np.full(40, 7.0), np.arange(40.0)
    linear, quadratic = NegativeBinomialLaw(mean, 1.4, LINEAR), NegativeBinomialLaw(mean, 0.2, QUADRATIC)
    np.testing.assert_allclose(linear.variance, 7.0 * 2.4)
    np.testing.assert_allclose(linear.log_density(w), quadratic.log_density(w), rtol=1e-13)
    np.testing.assert_allclose(linear.log_density(w), stats.nbinom.logpmf(w, 5.0, 5 / 12), rtol=1e-11)


def test_dispersion_may_differ_by_dyad() -> None:
    mean, alpha, w = np.full(3, 4.0), np.array([0.1, 1.0, 10.0]), np.array([2.0, 5.0, 9.0])
    together = NegativeBinomialLaw(mean, alpha, QUADRATIC).log_density(w)
    apart = [
        NegativeBinomialLaw(mean[:1], a, QUADRATIC).log_density(w[i : i + 1])[0] for i, a in enumerate(alpha)
    ]
    np.testing.assert_array_equal(together, apart)


LARGE: dict[str, FlowDistribution] = {
    "poisson": PoissonLaw(np.array([1e5, 1e8, 1e12])),
    "quadratic": NegativeBinomialLaw(np.array([1e12, 1e12, 1e12]), np.array([1e-15, 1e-4, 3.0]), QUADRATIC),
    "very dispersed": NegativeBinomialLaw(np.array([1e3, 1e12, 1.0]), np.array([1e8, 1e3, 1e8]), QUADRATIC),
    "linear": NegativeBinomialLaw(np.array([1e12, 1e12, 1e6]), np.array([1e-9, 1e6, 0.5]), LINEAR),
    "geometric": GeometricLinkLaw(np.array([1e12, 1e9, 1e-12])),
}


@pytest.mark.parametrize("name", LARGE)
@pytest.mark.parametrize("level", [1e-10, 0.025, 0.5, 0.975, 1 - 1e-10])
def test_quantiles_of_large_flows(name: str, level: float) -> None:
    law = LARGE[name]
    weight = law.quantile(level)
    assert (weight == np.floor(weight)).all()
    assert (law.cdf(weight) >= level).all()
    assert (law.cdf(weight - 1.0)[weight > 0] < level).all()


@pytest.mark.parametrize("name", ["poisson", "quadratic", "linear", "geometric"])
def test_draws_of_large_flows(name: str) -> None:
    """Mean and variance within 5 standard errors, that of the variance from the draws' fourth moment."""
    law, size = LARGE[name], 20_000
    draws = law.draw(np.random.default_rng(7), size)
    assert (draws == np.floor(draws)).all()
    centred = draws - law.mean
    squares = centred**2
    assert (np.abs(centred.mean(axis=0)) <= 5 * np.sqrt(law.variance / size)).all()
    error = np.sqrt(np.maximum((squares**2).mean(axis=0) - squares.mean(axis=0) ** 2, 0.0) / size)
    assert (np.abs(squares.mean(axis=0) - law.variance) <= 5 * error + 1e-9).all()


def test_draws_beyond_the_integers() -> None:
    law = NegativeBinomialLaw(np.full(4, 1e12), 1e8, QUADRATIC)  # gamma means reach 1e21
    draws = law.draw(np.random.default_rng(3), 5000)
    assert np.isfinite(draws).all()
    # P(w = 0) = exp(-1e-8 log(1 + 1e20)) = 1 - 4.6e-7
    assert (draws == 0).mean() > 0.999


def test_geometric_boundary() -> None:
    law = GeometricLinkLaw(np.zeros(3))
    np.testing.assert_array_equal(law.log_density(np.array([1.0, 2.0, 0.0])), [0.0, -np.inf, -np.inf])
    np.testing.assert_array_equal(law.quantile(1.0), 1.0)
    np.testing.assert_array_equal(law.draw(np.random.default_rng(1), 5), 1.0)


def test_hurdle_is_its_two_parts() -> None:
    eta, z = np.array([-1.0, 2.0]), np.array([0.5, 40.0])
    law = HurdleLaw(LinkLaw.from_log_odds(eta), GeometricLinkLaw(z))
    log_p = -np.log1p(np.exp(-eta))
    w = np.array([3.0, 17.0])
    closed = log_p + (w - 1) * np.log(z / (1 + z)) - np.log1p(z)
    np.testing.assert_allclose(law.log_density(w), closed, rtol=1e-13)
    np.testing.assert_allclose(law.mean, np.exp(log_p) * (1 + z), rtol=1e-14)
    np.testing.assert_allclose(law.variance, np.exp(log_p) * (1 + z) * (1 + 2 * z) - law.mean**2, rtol=1e-13)


def test_nothing_leaks_from_a_link_that_cannot_be() -> None:
    """The moments given a link are infinite on the first two dyads, and the second has a link for sure."""
    links = LinkLaw.from_log_odds(np.array([-np.inf, np.inf, 0.0]))
    law = HurdleLaw(links, LognormalLinkLaw(np.array([800.0, 800.0, 0.0]), 1.0))
    np.testing.assert_array_equal(law.mean[:2], [0.0, np.inf])
    np.testing.assert_array_equal(law.variance[:2], [0.0, np.inf])
    np.testing.assert_array_equal(law.log_density(np.zeros(3))[:2], [0.0, -np.inf])
    assert law.log_density(np.ones(3))[0] == -np.inf
    assert law.log_interval(np.zeros(3), np.full(3, np.inf))[0] == -np.inf
    assert law.quantile(1.0)[0] == 0.0
    assert (law.draw(np.random.default_rng(1), 50)[:, 0] == 0).all()


def test_hurdle_refuses_a_law_with_zeros_and_other_dyads() -> None:
    with pytest.raises(ModelError, match="truncate it at zero"):
        HurdleLaw(LinkLaw.from_log_odds(np.zeros(2)), PoissonLaw(np.ones(2)))
    with pytest.raises(ModelError, match="same dyads"):
        HurdleLaw(LinkLaw.from_log_odds(np.zeros(2)), GeometricLinkLaw(np.ones(3)))


@pytest.mark.parametrize("bad", [-1.0, np.nan, np.inf])
def test_parameters_out_of_bounds(bad: float) -> None:
    values = np.array([1.0, bad])
    with pytest.raises(ModelError, match=r"Poisson mean must be .* at dyad 1 \(1 of 2"):
        PoissonLaw(values)
    with pytest.raises(ModelError, match="Negative binomial mean"):
        NegativeBinomialLaw(values, 1.0, LINEAR)
    with pytest.raises(ModelError, match="Dispersion"):
        NegativeBinomialLaw(np.ones(2), bad, LINEAR)
    with pytest.raises(ModelError, match="Excess"):
        GeometricLinkLaw(values)


def test_parameters_of_the_wrong_shape() -> None:
    with pytest.raises(ModelError, match=r"shape \(1, 2\)"):
        PoissonLaw(np.ones((1, 2)))
    with pytest.raises(ModelError, match=r"expected \(2,\)"):
        NegativeBinomialLaw(np.ones(2), np.ones(3), QUADRATIC)
