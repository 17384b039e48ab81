"""Statistics of specification on plain arrays: closed forms, invariances, and inputs that allow no test."""

from __future__ import annotations

import math

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import stats

from steelyard.benchmark.specification.dispersion import overdispersion
from steelyard.benchmark.specification.finding import clustered_variance
from steelyard.benchmark.specification.likelihoods import likelihood_ratio, vuong
from steelyard.benchmark.specification.mean import reset_least_squares, standardised_square
from steelyard.benchmark.specification.means import rival_means
from steelyard.benchmark.specification.variance import park
from steelyard.models.covariance import NodePairs


def all_pairs(n_nodes: int) -> NodePairs:
    origin, destination = np.nonzero(~np.eye(n_nodes, dtype=bool))
    return NodePairs(origin, destination, n_nodes)


PAIRS = all_pairs(12)
N = 132


@pytest.fixture
def counts() -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(11)
    mean = np.exp(rng.normal(1.0, 0.7, N))
    return rng.poisson(mean * rng.gamma(2.0, 0.5, N)).astype(float), mean


def test_clustered_variance_is_the_sum_over_dyads_that_share_a_node() -> None:
    scores = np.random.default_rng(1).normal(size=N)
    ends = [{a, b} for a, b in zip(PAIRS.origin, PAIRS.destination, strict=True)]
    expected = sum(scores[d] * scores[e] for d in range(N) for e in range(N) if ends[d] & ends[e])
    assert clustered_variance(scores, PAIRS) == pytest.approx(expected, rel=1e-10)


def test_overdispersion_is_the_t_of_the_two_regressions(counts) -> None:
    w, m = counts
    found = overdispersion(w, m, None)
    z = ((w - m) ** 2 - w) / m
    for row, x in zip(found, (np.ones(N), m), strict=True):
        expected = sm.OLS(z, x).fit()
        assert row.statistic == pytest.approx(expected.tvalues[0], rel=1e-10)
        assert row.p_value == pytest.approx(stats.norm.sf(expected.tvalues[0]), rel=1e-9)


def test_overdispersion_keeps_its_digits_on_large_counts() -> None:
    """At m = 1e9 the squares of a Poisson error and the count nearly cancel; integers give the exact answer."""
    m = 10**9
    w = [m + e for e in (-31623, 31623, -44721, 10, 44721, -7, 20000, -20001)]
    exact = [((x - m) ** 2 - x) / m for x in w]  # Python integers: exact before the division
    found = overdispersion(np.array(w, dtype=float), np.full(8, float(m)), None)[0]
    assert found.statistic == pytest.approx(stats.ttest_1samp(exact, 0.0).statistic, rel=1e-9)


def test_overdispersion_leaves_out_means_of_zero_and_says_so(counts) -> None:
    w, m = counts
    whole = overdispersion(w, m, None)
    more = overdispersion(np.append(w, 0.0), np.append(m, 0.0), None)
    assert [r.statistic for r in more] == [r.statistic for r in whole]
    assert all("1 dyads without a finite positive mean left out" in r.note for r in more)


@pytest.mark.parametrize(
    ("w", "m"), [(np.ones(1), np.ones(1)), (np.full(6, 2.0), np.full(6, 2.0)), (np.zeros(4), np.zeros(4))]
)
def test_overdispersion_that_cannot_be_computed_says_why(w: np.ndarray, m: np.ndarray) -> None:
    for row in overdispersion(w, m, None):
        if math.isnan(row.statistic):
            assert row.note.startswith("not computed: ")
    assert math.isnan(overdispersion(w, m, None)[0].statistic)


def test_vuong_is_a_t_test_of_the_mean_difference_and_antisymmetric() -> None:
    first, second = np.random.default_rng(2).normal(size=(2, N)) - 3.0
    forth, back = vuong(first, second, 5, 3, PAIRS), vuong(second, first, 3, 5, PAIRS)
    assert forth[0].statistic == pytest.approx(stats.ttest_1samp(first - second, 0.0).statistic, rel=1e-12)
    spread = math.sqrt(N) * (first - second).std(ddof=1)
    assert forth[1].statistic == pytest.approx(((first - second).sum() - 2) / spread, rel=1e-12)
    assert forth[2].statistic == pytest.approx(((first - second).sum() - math.log(N)) / spread, rel=1e-12)
    assert [r.statistic for r in forth] == pytest.approx([-r.statistic for r in back], rel=1e-12, nan_ok=True)
    assert [r.against for r in forth][3] == "raw; node-clustered"


def test_vuong_says_why_it_cannot_be_computed() -> None:
    ll = np.linspace(-3.0, -1.0, N)
    impossible = ll.copy()
    impossible[4] = -np.inf
    for first, second, reason in (
        (ll, ll, "same ratio of densities"),
        (ll, impossible, "0 under the candidate, 1 under the other"),
        (ll[:1], ll[:1] + 1, "fewer than two"),
    ):
        found = vuong(first, second, 1, 1, None)
        assert all(math.isnan(r.statistic) and math.isnan(r.p_value) and reason in r.note for r in found)


def test_vuong_does_not_use_a_negative_clustered_variance() -> None:
    """Three dyads at one node with opposite differences: the sum over dyads that share a node is negative."""
    pairs = NodePairs(np.array([0, 1, 0, 2]), np.array([1, 0, 2, 3]), 4)
    d = np.array([1.0, 1.0, -3.0, 1.0])
    assert clustered_variance(d - d.mean(), pairs) < 0
    found = vuong(d, np.zeros(4), 1, 1, pairs)
    assert all(math.isfinite(r.statistic) for r in found[:3])
    assert all(math.isnan(r.statistic) and "variance is not positive" in r.note for r in found[3:])


def test_likelihood_ratio_inside_and_at_the_edge() -> None:
    inside = likelihood_ratio(-100.0, -97.0, 2, False, "x")
    assert inside.statistic == pytest.approx(6.0)
    assert inside.p_value == pytest.approx(math.exp(-3.0))  # chi-square(2) has tail exp(-x / 2)
    edge = likelihood_ratio(-100.0, -98.0, 0, True, "x")
    assert edge.p_value == pytest.approx(0.5 * stats.chi2.sf(4.0, 1))
    assert likelihood_ratio(-100.0, -100.0, 0, True, "x").p_value == pytest.approx(1.0)
    mixed = likelihood_ratio(-100.0, -97.0, 2, True, "x")
    assert mixed.p_value == pytest.approx(0.5 * stats.chi2.sf(6.0, 2) + 0.5 * stats.chi2.sf(6.0, 3))


@pytest.mark.parametrize(
    ("smaller", "larger", "free", "reason"),
    [
        (-math.inf, -1.0, 1, "not finite"),
        (-1.0, -1.0, 0, "no identified parameter more"),
        (-1.0, -2.0, 1, "fits worse"),
    ],
)
def test_likelihood_ratio_says_why(smaller: float, larger: float, free: int, reason: str) -> None:
    found = likelihood_ratio(smaller, larger, free, False, "x")
    assert math.isnan(found.statistic)
    assert reason in found.note


def test_reset_agrees_with_statsmodels_and_ignores_aliased_columns() -> None:
    rng = np.random.default_rng(5)
    x = rng.normal(size=(60, 2))
    y = 1 + x[:, 0] - 0.5 * x[:, 1] ** 2 + rng.normal(size=60)
    design = np.column_stack([np.ones(60), x])
    from statsmodels.stats.diagnostic import linear_reset

    expected = linear_reset(sm.OLS(y, design).fit(), power=3, test_type="fitted", use_f=True)
    found = reset_least_squares(y, design)
    assert found.statistic == pytest.approx(float(expected.fvalue), rel=1e-8)
    doubled = reset_least_squares(y, np.column_stack([design, 3 * x[:, 0] + 1]))
    assert doubled.statistic == pytest.approx(found.statistic, rel=1e-8)


def test_reset_says_why() -> None:
    dummy = np.column_stack([np.ones(20), np.arange(20) % 2])
    y = np.random.default_rng(1).normal(size=20)
    assert "combinations of the covariates" in reset_least_squares(y, dummy).note
    assert "do not vary" in reset_least_squares(np.ones(20), dummy).note
    line = np.column_stack([np.ones(20), np.arange(20.0)])
    assert "no residual" in reset_least_squares(line[:, 1] * 2 + 1, line).note
    assert "too few" in reset_least_squares(y[:4], line[:4] ** 1).note
    assert standardised_square(np.full(5, 3.0)) is None
    assert standardised_square(np.array([np.inf])) is None


def test_square_is_zero_where_the_index_is_infinite() -> None:
    found = standardised_square(np.array([-np.inf, 1.0, 3.0]))
    assert found is not None
    np.testing.assert_allclose(found, [0.0, 1.0, 1.0])


def test_park_recovers_an_exact_power() -> None:
    """Errors of size 3 m^0.8 make (w - m)^2 = 9 m^1.6 exactly."""
    m = np.exp(np.linspace(-1, 6, N))
    w = m + np.where(np.arange(N) % 2, 3.0, -3.0) * m**0.8
    found = park(w, m, m, 1.0, "x", PAIRS)
    assert all("lambda = 1.6" in r.note for r in found)


def test_park_is_the_same_in_any_unit(counts) -> None:
    w, m = counts
    once, scaled = park(w, m, m, 1.0, "x", PAIRS), park(w * 1e9, m * 1e9, m * 1e9, 1.0, "x", PAIRS)
    assert [r.statistic for r in once] == pytest.approx([r.statistic for r in scaled], rel=1e-6)


@pytest.mark.parametrize(
    ("w", "m", "reason"),
    [
        (np.arange(N) * 1.0, np.full(N, 3.0), "does not vary"),
        (np.arange(1.0, N + 1), np.arange(1.0, N + 1), "every fitted mean equals"),
        (np.zeros(N), np.zeros(N), "fewer than three"),
    ],
)
def test_park_says_why(w: np.ndarray, m: np.ndarray, reason: str) -> None:
    assert all(math.isnan(r.statistic) and reason in r.note for r in park(w, m, m, 1.0, "x", PAIRS))


def test_rival_means_is_the_last_t_of_the_weighted_regression() -> None:
    rng = np.random.default_rng(9)
    x = np.column_stack([np.ones(N), rng.normal(size=N)])
    m = np.exp(x @ [0.5, 0.4])
    rival = np.maximum(x @ [1.7, 0.6], 0.01)
    w = rng.poisson(m).astype(float)
    root = np.sqrt(m)[:, None]
    columns = np.column_stack([m[:, None] * x, rival - m]) / root
    expected = sm.OLS((w - m) / root[:, 0], columns).fit()
    n, k = columns.shape
    hc0 = expected.get_robustcov_results("HC0").bse[-1]
    found = rival_means(w, m, m[:, None] * x, [rival], PAIRS)[0]
    assert found[0].statistic == pytest.approx(expected.params[-1] / hc0 * math.sqrt((n - k) / n), rel=1e-8)
    assert "formula from memory" in found[0].note


def test_rival_means_says_why() -> None:
    m = np.linspace(1.0, 4.0, N)
    x = np.ones((N, 1))
    w = np.arange(N) % 5 * 1.0
    infinite = m.copy()
    infinite[0] = np.inf
    same, in_span, unbounded = rival_means(w, m, m[:, None] * x, [m, 1.5 * m, infinite], PAIRS)
    assert all("do not differ" in r.note for r in (*same, *in_span))
    assert all("not finite" in r.note for r in unbounded)
    few = rival_means(w, np.zeros(N), m[:, None] * x, [m], PAIRS)[0]
    assert all("only 0 dyads" in r.note and math.isnan(r.statistic) for r in few)
