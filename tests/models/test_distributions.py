"""Identities that every law of flows must keep, over laws with ordinary dyads and dyads on the boundary."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from steelyard.models.distributions import (
    AmountsDistribution,
    CellLaw,
    DispersionForm,
    FlowDistribution,
    GeometricLinkLaw,
    HurdleLaw,
    LinkLaw,
    LognormalLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
    as_amounts,
)
from steelyard.models.errors import ModelError
from steelyard.models.measure import Measure

MEANS = np.array([0.0, 1e-3, 0.7, 3.0, 25.0])
LINKS = LinkLaw.from_log_odds(np.array([-np.inf, -2.0, 0.0, 3.0, np.inf]))
LOGNORMAL = LognormalLinkLaw(np.array([0.0, -2.0, 0.5, 1.0, 3.0]), 0.6)
HURDLE = HurdleLaw(LINKS, LOGNORMAL)

LAWS: dict[str, FlowDistribution] = {
    "links": LINKS,
    "poisson": PoissonLaw(MEANS),
    "negative binomial, quadratic": NegativeBinomialLaw(MEANS, 0.8, DispersionForm.QUADRATIC),
    "negative binomial, linear": NegativeBinomialLaw(MEANS, 0.8, DispersionForm.LINEAR),
    "negative binomial, no dispersion": NegativeBinomialLaw(MEANS, 0.0, DispersionForm.LINEAR),
    "geometric": GeometricLinkLaw(MEANS),
    "lognormal": LOGNORMAL,
    "hurdle, geometric": HurdleLaw(LINKS, GeometricLinkLaw(MEANS)),
    "hurdle, lognormal": HURDLE,
    "cells": CellLaw(HURDLE),
    "cells given a link": CellLaw(LOGNORMAL),
    "hurdle, cells": HurdleLaw(LINKS, CellLaw(LOGNORMAL)),
}
WHOLE = [name for name, law in LAWS.items() if law.measure is not Measure.AMOUNTS]
AMOUNTS = [name for name, law in LAWS.items() if law.measure is Measure.AMOUNTS]
EXACT_MOMENTS = [name for name in WHOLE if "cells" not in name]  # cells keep the moments of the amounts
GRID = np.arange(2000.0)  # no law above has mass of 1e-13 beyond


def masses(law: FlowDistribution) -> np.ndarray:
    """(grid, n) probabilities."""
    return np.exp(law.log_density(np.repeat(GRID[:, None], len(law.mean), axis=1)))


@pytest.mark.parametrize("name", LAWS)
def test_meets_the_protocol(name: str) -> None:
    law = LAWS[name]
    assert isinstance(law, FlowDistribution)
    assert isinstance(law, AmountsDistribution) >= (law.measure is Measure.AMOUNTS)
    for values in (law.link_probability, law.mean, law.variance):
        assert values.shape == (5,)
        assert values.dtype == np.float64
        assert not np.isnan(values).any()


@pytest.mark.parametrize("name", LAWS)
def test_many_weights_of_each_dyad_at_once(name: str) -> None:
    law = LAWS[name]
    w = np.array([[0.0, 1.0, 2.0, 0.0, 5.0], [1.0, 1.0, 0.0, 3.0, 1e6]])
    np.testing.assert_array_equal(law.log_density(w), [law.log_density(row) for row in w])
    np.testing.assert_array_equal(law.cdf(w), [law.cdf(row) for row in w])


@pytest.mark.parametrize("name", WHOLE)
def test_masses_sum_to_one_and_to_the_cdf(name: str) -> None:
    law = LAWS[name]
    total = np.cumsum(masses(law), axis=0)
    np.testing.assert_allclose(total[-1], 1.0, rtol=1e-12)
    for w in (0.0, 1.0, 2.0, 7.0, 30.0):
        np.testing.assert_allclose(law.cdf(np.full(5, w)), total[int(w)], rtol=1e-12)
        np.testing.assert_array_equal(law.cdf(np.full(5, w + 0.7)), law.cdf(np.full(5, w)))


@pytest.mark.parametrize("name", EXACT_MOMENTS)
def test_mean_and_variance_are_those_of_the_masses(name: str) -> None:
    law = LAWS[name]
    mass = masses(law)
    mean = GRID @ mass
    np.testing.assert_allclose(law.mean, mean, rtol=1e-11)
    np.testing.assert_allclose(law.variance, (GRID**2) @ mass - mean**2, rtol=1e-9, atol=1e-12)


@pytest.mark.parametrize("name", AMOUNTS)
def test_density_in_w_integrates_to_one_and_to_the_moments(name: str) -> None:
    """Trapezoid rule in log w over 18 deviations: exact to rounding for so smooth a density."""
    law = LAWS[name]
    step = 0.02
    log_w = np.arange(-12.0, 14.0, step)
    w = np.exp(log_w)
    density = np.exp(law.log_density(np.repeat(w[:, None], 5, axis=1))) * w[:, None]
    at_zero = np.exp(law.log_density(np.zeros(5)))
    mean = w @ density * step
    np.testing.assert_allclose(at_zero + density.sum(axis=0) * step, 1.0, rtol=1e-12)
    np.testing.assert_allclose(law.mean, mean, rtol=1e-11)
    np.testing.assert_allclose(law.variance, w**2 @ density * step - mean**2, rtol=1e-10)
    upto = at_zero + (density * (log_w < 1.0 + step / 4)[:, None]).sum(axis=0) * step
    # the last point counts half; what is left is the rule's edge error, step^2 f' / 12
    upto -= density[np.searchsorted(log_w, 1.0 - step / 4)] * step / 2
    np.testing.assert_allclose(law.cdf(np.full(5, np.e)), upto, atol=1e-4)


@pytest.mark.parametrize("name", LAWS)
def test_probability_of_zero(name: str) -> None:
    law = LAWS[name]
    at_zero = np.exp(law.log_density(np.zeros(5)))
    np.testing.assert_allclose(at_zero, 1.0 - law.link_probability, rtol=0, atol=1e-15)
    np.testing.assert_allclose(law.cdf(np.zeros(5)), at_zero, rtol=1e-12, atol=1e-15)


@pytest.mark.parametrize("name", LAWS)
def test_draws_have_the_mean_the_variance_and_the_zeros(name: str) -> None:
    """Within 5 standard errors; that of the variance from the fourth moment of the draws."""
    law, size = LAWS[name], 40_000
    draws = law.draw(np.random.default_rng(20310), size)
    assert draws.shape == (size, 5)
    mean, variance = law.mean, law.variance
    if name not in EXACT_MOMENTS and law.measure is Measure.COUNTS:
        mass = masses(law)
        mean = GRID @ mass
        variance = GRID**2 @ mass - mean**2
    centred = draws - draws.mean(axis=0)
    got = (centred**2).mean(axis=0)
    of_variance = np.sqrt(np.maximum((centred**4).mean(axis=0) - got**2, 0.0) / size)
    p = law.link_probability
    assert (np.abs(draws.mean(axis=0) - mean) <= 5 * np.sqrt(variance / size) + 1e-12).all()
    assert (np.abs(got - variance) <= 5 * of_variance + 5 * variance / size + 1e-9).all()
    assert (np.abs((draws > 0).mean(axis=0) - p) <= 5 * np.sqrt(p * (1 - p) / size) + 1e-12).all()


@pytest.mark.parametrize("name", LAWS)
def test_draws_follow_the_cdf_and_their_generator(name: str) -> None:
    """Kolmogorov's bound on the empirical cdf, level 1e-6 for each dyad and point."""
    law, size = LAWS[name], 20_000
    draws = law.draw(np.random.default_rng(5), size)
    np.testing.assert_array_equal(draws, law.draw(np.random.default_rng(5), size))
    for w in (0.0, 0.3, 1.0, 1.6, 4.0, 20.0):
        assert (np.abs((draws <= w).mean(axis=0) - law.cdf(np.full(5, w))) < 2.7 / np.sqrt(size)).all()


@pytest.mark.parametrize("name", LAWS)
@settings(max_examples=25, deadline=None)
@given(level=st.one_of(st.floats(0.0, 1.0, exclude_max=True), st.sampled_from([0.5, 1e-12, 1 - 1e-12])))
def test_quantile_is_the_smallest_weight_that_reaches_the_level(name: str, level: float) -> None:
    law = LAWS[name]
    weight = law.quantile(level)
    assert (law.cdf(weight) >= level).all()
    below = np.nextafter(weight, -1.0) if law.measure is Measure.AMOUNTS else weight - 1.0
    assert (law.cdf(below)[weight > 0] < level).all()
    np.testing.assert_array_equal(law.quantile(np.full(5, level)), weight)


@pytest.mark.parametrize("name", LAWS)
def test_quantile_at_the_ends(name: str) -> None:
    law = LAWS[name]
    np.testing.assert_array_equal(law.quantile(0.0), 0.0)
    assert (law.cdf(law.quantile(1.0)) == 1.0).all()
    for level in (-0.1, 1.1, np.nan):
        with pytest.raises(ModelError, match="Probability level"):
            law.quantile(level)
    with pytest.raises(ModelError, match=r"expected \(5,\)"):
        law.quantile(np.full(3, 0.5))


@pytest.mark.parametrize("name", LAWS)
@pytest.mark.parametrize("weight", [-1.0, -1e-9, np.nan, np.inf, 0.5])
def test_impossible_weights_have_no_probability(name: str, weight: float) -> None:
    law = LAWS[name]
    if weight == 0.5 and law.measure is Measure.AMOUNTS:
        return
    assert (law.log_density(np.full(5, weight)) == -np.inf).all()


@pytest.mark.parametrize("name", LAWS)
def test_any_weight_has_a_log_density_that_is_not_nan(name: str) -> None:
    law = LAWS[name]
    for weight in (0.0, 5e-324, 1e-300, 1.0, 1e12, 1e15, 2.0**53, 1e300):
        assert not np.isnan(law.log_density(np.full(5, weight))).any()
        assert not np.isnan(law.cdf(np.full(5, weight))).any()
    np.testing.assert_array_equal(law.cdf(np.full(5, -1.0)), 0.0)
    np.testing.assert_array_equal(law.cdf(np.full(5, np.inf)), 1.0)


@pytest.mark.parametrize("name", WHOLE)
def test_laws_of_whole_numbers_have_no_interval_probabilities(name: str) -> None:
    with pytest.raises(ModelError, match="law of amounts"):
        as_amounts(LAWS[name])
    with pytest.raises(ModelError, match="law of amounts"):
        CellLaw(LAWS[name])
