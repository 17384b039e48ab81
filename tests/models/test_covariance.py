"""Sandwich covariances against literal double loops, closed forms and statsmodels."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm

from steelyard.datasets import Floats
from steelyard.models.covariance import NodePairs, covariances, node_clustered_meat
from steelyard.models.estimates import ErrorKind
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson


def pairs_of(n_nodes: int, directed: bool, share: float, seed: int) -> NodePairs:
    """All dyads, or a random share of them."""
    rng = np.random.default_rng(seed)
    mask = ~np.eye(n_nodes, dtype=bool) if directed else np.triu(np.ones((n_nodes, n_nodes), bool), 1)
    mask &= rng.random((n_nodes, n_nodes)) < share
    origin, destination = np.nonzero(mask)
    return NodePairs(origin.astype(np.int64), destination.astype(np.int64), n_nodes)


def meat_by_double_loop(scores: Floats, pairs: NodePairs) -> Floats:
    """Sum of s_d s_e' over all ordered pairs of dyads with a node in common, each pair once."""
    total = np.zeros((scores.shape[1], scores.shape[1]))
    ends = [{int(i), int(j)} for i, j in zip(pairs.origin, pairs.destination, strict=True)]
    for d, first in enumerate(ends):
        for e, second in enumerate(ends):
            if first & second:
                total += np.outer(scores[d], scores[e])
    return total


@pytest.mark.parametrize("share", [1.0, 0.6, 0.1])
@pytest.mark.parametrize("directed", [True, False])
def test_meat_is_the_literal_double_loop(directed: bool, share: float) -> None:
    for seed in range(4):
        pairs = pairs_of(9, directed, share, seed)
        scores = np.random.default_rng(100 + seed).normal(size=(len(pairs.origin), 3)) * [1.0, 1e3, 1e-3]
        expected = meat_by_double_loop(scores, pairs)
        size = np.sqrt(np.outer((scores**2).sum(axis=0), (scores**2).sum(axis=0))) + 1e-300
        assert (np.abs(node_clustered_meat(scores, pairs) - expected) / size).max() < 1e-12


def test_one_dyad_and_two_strangers() -> None:
    """One dyad: s s'. Dyads 1-2 and 3-4 share nothing: no cross term. Both directions of one pair: all terms."""
    s = np.array([[2.0], [3.0]])
    position = np.array([0, 1])
    one = NodePairs(np.array([0]), np.array([1]), 4)
    assert node_clustered_meat(s[:1], one) == pytest.approx(4.0)
    strangers = NodePairs(2 * position, 2 * position + 1, 4)
    assert node_clustered_meat(s, strangers) == pytest.approx(4.0 + 9.0)
    both_ways = NodePairs(position, 1 - position, 4)
    assert node_clustered_meat(s, both_ways) == pytest.approx((2.0 + 3.0) ** 2)
    shared = NodePairs(np.array([0, 0]), np.array([1, 2]), 4)
    assert node_clustered_meat(s, shared) == pytest.approx((2.0 + 3.0) ** 2)


def test_the_three_kinds_of_a_poisson_mean_in_closed_form() -> None:
    """With a constant only, the information is W and the score w - m.

    So the model variance of the log mean is 1 / W, the robust one sum (w - m)^2 / W^2 times n / (n - 1).
    """
    rng = np.random.default_rng(1)
    pairs = pairs_of(12, True, 1.0, 0)
    n = len(pairs.origin)
    w = rng.poisson(3.0, n) + 4.0 * (rng.random(n) < 0.2)
    found = fit_indices(Poisson(w), [np.ones((n, 1))], pairs)
    mean, total = w.mean(), w.sum()
    by_kind = {kind: float(matrix[0, 0]) for kind, matrix in found.covariances.items()}
    assert by_kind[ErrorKind.MODEL] == pytest.approx(1 / total, rel=1e-10)
    robust = ((w - mean) ** 2).sum() / total**2 * n / (n - 1)
    assert by_kind[ErrorKind.ROBUST] == pytest.approx(robust, rel=1e-10)
    clustered = meat_by_double_loop((w - mean)[:, None], pairs)[0, 0] / total**2
    if clustered > 0:
        assert by_kind[ErrorKind.NODE_CLUSTERED] == pytest.approx(clustered, rel=1e-8)
        assert not found.repaired
    else:
        assert by_kind[ErrorKind.NODE_CLUSTERED] == 0.0
        assert found.repaired == {ErrorKind.NODE_CLUSTERED}


def test_hc1_is_hc0_of_statsmodels_times_its_factor() -> None:
    rng = np.random.default_rng(2)
    n = 300
    design = np.column_stack([np.ones(n), rng.normal(size=(n, 2)) * [1.0, 50.0]])
    w = rng.poisson(np.exp(design @ [0.5, 0.4, 0.01]) * rng.gamma(2.0, 0.5, n)).astype(float)
    found = fit_indices(Poisson(w), [design])
    outside = sm.GLM(w, design, family=sm.families.Poisson()).fit(cov_type="HC0", tol=1e-14, maxiter=200)
    np.testing.assert_allclose(
        found.covariances[ErrorKind.ROBUST], outside.cov_params() * n / (n - 3), rtol=1e-7
    )
    assert ErrorKind.NODE_CLUSTERED not in found.covariances


def test_without_degrees_of_freedom_there_is_no_factor() -> None:
    found = covariances(np.eye(2), np.eye(2), None)
    assert np.isnan(found.by_kind[ErrorKind.ROBUST]).all()
    np.testing.assert_array_equal(found.by_kind[ErrorKind.MODEL], np.eye(2))


def test_an_indefinite_variance_is_clipped_and_named() -> None:
    """Scores of opposite sign around shared nodes: the clustered meat of one number is negative.

    Dyads 0-1, 0-2 and 1-2 share nodes pairwise, 3-4 stands alone; scores 1, -1, -1, 1 give
    (1 - 1 - 1)^2 + 1 > 0, and 0-1, 2-3 with 1-2 between them give 1 + 1 + 1 + 2 (-1 - 1) = -1.
    """
    pairs = NodePairs(np.array([0, 2, 1]), np.array([1, 3, 2]), 4)
    scores = np.array([[1.0], [1.0], [-1.0]])
    assert node_clustered_meat(scores, pairs) == pytest.approx(-1.0)
    found = covariances(np.eye(1), scores, pairs)
    assert found.repaired == {ErrorKind.NODE_CLUSTERED}
    assert found.by_kind[ErrorKind.NODE_CLUSTERED] == pytest.approx(0.0)
    assert found.standard_errors(ErrorKind.NODE_CLUSTERED)[0] == 0.0


def test_repair_leaves_the_nearest_semidefinite_matrix() -> None:
    """Many random meats, parameters of very unlike scale: repaired ones are semidefinite, others untouched."""
    repaired = 0
    for seed in range(60):
        pairs = pairs_of(7, True, 0.5, seed)
        rng = np.random.default_rng(seed)
        unit = np.array([1.0, 1e4, 1e-4])
        scores = rng.normal(size=(len(pairs.origin), 3)) * unit
        information = np.diag(unit**2) * len(scores)
        found = covariances(information, scores, pairs)
        matrix = found.by_kind[ErrorKind.NODE_CLUSTERED]
        # Back in units in which every parameter counts alike.
        shown = np.linalg.eigvalsh(matrix * np.outer(unit, unit))
        assert shown.min() > -1e-12
        bread = np.linalg.inv(information)
        plain = bread @ meat_by_double_loop(scores, pairs) @ bread * np.outer(unit, unit)
        values, vectors = np.linalg.eigh(plain)
        negative = values.min() < -1e-9 * values.max()
        assert negative == bool(found.repaired)
        nearest = (vectors * np.maximum(values, 0)) @ vectors.T
        np.testing.assert_allclose(matrix * np.outer(unit, unit), nearest, atol=1e-12)
        repaired += negative
    assert 5 < repaired < 55, "the cases must cover both kinds"


def test_three_nodes_leave_no_clustered_variance() -> None:
    """Any two dyads of three nodes share one, so the clustered meat is the square of a zero gradient."""
    pairs = pairs_of(3, True, 1.0, 0)
    w = np.array([1.0, 4, 2, 7, 3, 5])
    found = fit_indices(Poisson(w), [np.ones((6, 1))], pairs)
    assert found.covariances[ErrorKind.NODE_CLUSTERED][0, 0] == 0.0
