"""Laws of amounts and their cells: scipy's lognormal, both tails, narrow cells and the unit."""

from __future__ import annotations

import math
from decimal import Decimal, localcontext

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from steelyard.models.distributions import CellLaw, HurdleLaw, LinkLaw, LognormalLinkLaw
from steelyard.models.errors import ModelError


def exact_log_interval(lower: float, upper: float, location: float, scale: float) -> float:
    """Log probability of a lognormal interval: Simpson's rule in log w with 50 decimal digits."""
    with localcontext() as context:
        context.prec = 50
        a, b = Decimal(lower).ln(), Decimal(upper).ln()
        m, s = Decimal(location), Decimal(scale)
        panels = 20_000 if scale < 0.1 and upper < 10 else 2000  # the fast falling density needs more
        step = (b - a) / panels
        total = Decimal(0)
        for k in range(panels + 1):
            z = (a + k * step - m) / s
            total += (1 if k in (0, panels) else 4 if k % 2 else 2) * (-z * z / 2).exp()
        two_pi = Decimal("6.28318530717958647692528676655900576839433879875021")
        return float((total * step / 3 / s).ln() - two_pi.ln() / 2)


@pytest.mark.parametrize(
    ("count", "location", "scale"),
    [
        (2.0, 0.0, 1.0),
        (3.0, 8.0, 0.5),  # far in the lower tail: z = -14
        (1e4, 0.0, 0.25),  # far in the upper tail: z = 37
        (1e6, -20.0, 1.0),  # z = 34, a cell much narrower than a deviation
        (1e9, 20.0, 2.0),
        (1e12, 27.0, 1.5),  # log(c + 1/2) - log(c - 1/2) has no digits left
        (1e12, 27.0, 1e-3),
        (7.0, 0.0, 0.02),  # z = 93: the difference of two probabilities is 0
    ],
)
def test_cells_of_the_lognormal(count: float, location: float, scale: float) -> None:
    law = CellLaw(LognormalLinkLaw(np.array([location]), scale))
    exact = exact_log_interval(count - 0.5, count + 0.5, location, scale)
    assert law.log_density(np.array([count]))[0] == pytest.approx(exact, rel=1e-10)


@settings(max_examples=100, deadline=None)
@given(
    lower=st.floats(1e-3, 50.0),
    factor=st.floats(1.001, 30.0),
    location=st.floats(-2, 3),
    scale=st.floats(0.3, 3),
)
def test_intervals_agree_with_scipy(lower: float, factor: float, location: float, scale: float) -> None:
    law, frozen = (
        LognormalLinkLaw(np.array([location]), scale),
        stats.lognorm(scale, scale=math.exp(location)),
    )
    upper = lower * factor
    by_cdf, by_sf = frozen.cdf(upper) - frozen.cdf(lower), frozen.sf(lower) - frozen.sf(upper)
    expected = by_cdf if frozen.cdf(upper) < 0.5 else by_sf
    got = law.log_interval(np.array([lower]), np.array([upper]))[0]
    # scipy's difference loses digits in proportion to the larger of its two terms
    lost = 4e-16 * min(frozen.cdf(upper), frozen.sf(lower)) / max(expected, 1e-300)
    assert got == pytest.approx(math.log(expected), rel=1e-9, abs=1e-9 + 20 * lost)


def test_lognormal_agrees_with_scipy() -> None:
    w = np.array([1e-8, 0.3, 1.0, 20.0, 1e9])
    law, frozen = LognormalLinkLaw(np.full(5, 0.4), 1.7), stats.lognorm(1.7, scale=math.exp(0.4))
    np.testing.assert_allclose(law.log_density(w), frozen.logpdf(w), rtol=1e-12)
    np.testing.assert_allclose(law.cdf(w), frozen.cdf(w), rtol=1e-12)
    np.testing.assert_allclose(law.mean, frozen.mean(), rtol=1e-13)
    np.testing.assert_allclose(law.variance, frozen.var(), rtol=1e-12)


def test_intervals_are_additive_and_complete() -> None:
    edges = np.array([0.0, 1e-6, 0.2, 1.0, 1.0 + 1e-9, 3.0, 1e4, np.inf])
    law = LognormalLinkLaw(np.full(7, 0.3), 1.1)
    parts = np.exp(law.log_interval(edges[:-1], edges[1:]))
    assert parts.sum() == pytest.approx(1.0, rel=1e-13)
    assert parts[3] == pytest.approx(1e-9 * math.exp(law.log_density(np.full(7, 1.0))[0]), rel=1e-6)


def test_a_unit_ten_times_larger_shifts_the_log_density() -> None:
    """Amounts in a new unit are w / u, so the density of a link gains exactly log u, a missing one 0."""
    unit, w = 10.0, np.array([0.0, 3.0, 700.0])
    links, location = LinkLaw.from_log_odds(np.array([0.3, -1.0, 2.0])), np.array([0.0, 1.0, 5.0])
    before = HurdleLaw(links, LognormalLinkLaw(location, 0.8))
    after = HurdleLaw(links, LognormalLinkLaw(location - math.log(unit), 0.8))
    gain = after.log_density(w / unit) - before.log_density(w)
    np.testing.assert_allclose(gain, [0.0, math.log(unit), math.log(unit)], atol=1e-14)


def test_cells_of_a_hurdle_add_the_log_probability_of_the_link() -> None:
    links = LinkLaw.from_log_odds(np.array([-3.0, 0.5, -np.inf]))
    given_link = LognormalLinkLaw(np.array([2.0, 2.0, 2.0]), 1.0)
    cells, given_cells = CellLaw(HurdleLaw(links, given_link)), CellLaw(given_link)
    for count in (1.0, 2.0, 40.0, 1e15):
        w = np.full(3, count)
        expected = links.log_link_probability[:2] + given_cells.log_density(w)[:2]
        np.testing.assert_allclose(cells.log_density(w)[:2], expected, rtol=1e-14)
        assert cells.log_density(w)[2] == -np.inf
    np.testing.assert_array_equal(cells.log_density(np.zeros(3)), links.log_no_link_probability)


def test_the_first_cell_holds_every_small_link() -> None:
    law = CellLaw(LognormalLinkLaw(np.array([-5.0]), 1.0))
    frozen = stats.lognorm(1.0, scale=math.exp(-5.0))
    assert law.log_density(np.ones(1))[0] == pytest.approx(frozen.logcdf(1.5), rel=1e-12)
    assert law.log_density(np.zeros(1))[0] == -np.inf
    assert (law.draw(np.random.default_rng(2), 100) >= 1).all()


def test_cells_pass_over_into_the_density_without_a_step() -> None:
    """Where halves are no longer representable (2^51) a cell of width one is its density."""
    law = LognormalLinkLaw(np.full(4, 35.0), 1.0)
    w = 2.0**51 + np.array([-1.0, 0.0, 1.0, 2.0])
    np.testing.assert_allclose(CellLaw(law).log_density(w), law.log_density(w), rtol=1e-13)


def test_variance_overflows_to_infinity_and_never_to_nan() -> None:
    law = LognormalLinkLaw(np.array([-1e4, 0.0, 1e4]), np.array([30.0, 40.0, 1e-9]))
    np.testing.assert_array_equal(law.variance, [0.0, np.inf, np.inf])
    np.testing.assert_array_equal(law.mean, [0.0, np.inf, np.inf])


@pytest.mark.parametrize("scale", [0.0, -1.0, np.nan, np.inf])
def test_a_scale_must_be_above_zero(scale: float) -> None:
    with pytest.raises(ModelError, match="Scale of log weights must be finite, > 0"):
        LognormalLinkLaw(np.zeros(2), scale)
    with pytest.raises(ModelError, match="Location"):
        LognormalLinkLaw(np.array([0.0, np.nan]), 1.0)
