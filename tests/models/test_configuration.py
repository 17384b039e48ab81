"""The configuration model: degrees matched, the same maximum as a logit with node indicators, exact counts."""

from __future__ import annotations

from itertools import combinations, permutations, product

import networkx as nx
import numpy as np
import pytest
import statsmodels.api as sm
from scipy.optimize import brentq
from scipy.sparse import csr_array
from scipy.special import expit

from steelyard.datasets import Bools, Dyads, Floats, FlowNetwork, Provenance, dataset_registry
from steelyard.models.estimates import ErrorKind, EstimatePart, Status
from steelyard.models.maximum_entropy.configuration import ConfigurationModel, FittedConfiguration
from steelyard.models.maximum_entropy.density import DensityModel


def dyads_of(links: Floats, directed: bool) -> Dyads:
    """All dyads of a 0/1 matrix; undirected reads i < j."""
    flows = csr_array(links.astype(float) if directed else np.triu(links.astype(float), 1))
    labels = tuple(f"n{i}" for i in range(len(links)))
    return Dyads(FlowNetwork(labels, flows, directed, 1.0, {}, {}, Provenance("made in a test")))


def random_links(n: int, share: float, directed: bool, seed: int) -> Floats:
    rng = np.random.default_rng(seed)
    size = rng.normal(size=n)
    links = rng.random((n, n)) < expit(np.log(share / (1 - share)) + size[:, None] + size[None, :])
    np.fill_diagonal(links, False)
    return links.astype(float) if directed else np.triu(links, 1).astype(float)


def library_graph(name: str) -> Dyads:
    graph = nx.karate_club_graph() if name == "karate club" else nx.les_miserables_graph()
    return dyads_of(nx.to_numpy_array(graph, weight=None), directed=False)


def data_set(name: str, directed: bool) -> Dyads:
    """A data set of the catalogue; undirected, the two directions of its links taken together."""
    network = dataset_registry().get(name).load(directed=True)
    if directed:
        return Dyads(network)
    links = network.flows.toarray()
    return dyads_of(((links + links.T) > 0).astype(float), directed=False)


CASES = {
    "karate club": lambda: library_graph("karate club"),
    "les miserables": lambda: library_graph("les miserables"),
    "states, directed": lambda: data_set("state-air-2008", True),
    "states, undirected": lambda: data_set("state-air-2008", False),
    "airports, directed": lambda: data_set("air-routes-2008", True),
    "airports, undirected": lambda: data_set("air-routes-2008", False),
}


def indicators(dyads: Dyads) -> Floats:
    """(n, 2N or N) node indicator columns: origin and destination, or both ends."""
    n = dyads.n_nodes
    origin, destination = np.eye(n)[dyads.origin], np.eye(n)[dyads.destination]
    return np.hstack([origin, destination]) if dyads.directed else origin + destination


def free_dyads(found: FittedConfiguration, dyads: Dyads) -> Bools:
    return np.isfinite(found.log_odds(dyads))


@pytest.mark.parametrize("case", CASES)
def test_expected_degrees_are_the_observed_ones(case: str) -> None:
    dyads = CASES[case]()
    found = ConfigurationModel().fit(dyads)
    assert found.convergence.converged
    expected = dyads.node_sums(found.expected_weight(dyads))
    observed = dyads.node_sums(dyads.links.astype(float))
    for got, wanted in zip(expected, observed, strict=True):
        assert (np.abs(got - wanted) / np.maximum(1.0, wanted)).max() < 1e-8


@pytest.mark.parametrize("case", CASES)
def test_parameter_count_is_the_rank_of_the_indicators_on_free_dyads(case: str) -> None:
    dyads = CASES[case]()
    found = ConfigurationModel().fit(dyads)
    free = free_dyads(found, dyads)
    assert found.n_parameters == np.linalg.matrix_rank(indicators(dyads)[free])
    at_boundary = sum(e.status is Status.BOUNDARY for e in found.estimates)
    full = 2 * dyads.n_nodes - 1 if dyads.directed else dyads.n_nodes
    assert found.n_parameters == full - at_boundary


@pytest.mark.parametrize("directed", [True, False])
@pytest.mark.parametrize("seed", range(8))
def test_small_networks_count_their_rank(seed: int, directed: bool) -> None:
    """Sparse and dense networks with many fixed dyads, where "N less the nodes peeled" can be wrong."""
    for share in (0.15, 0.4, 0.8):
        dyads = dyads_of(random_links(8, share, directed, seed), directed)
        found = ConfigurationModel().fit(dyads)
        assert found.convergence.converged
        free = free_dyads(found, dyads)
        rank = np.linalg.matrix_rank(indicators(dyads)[free]) if free.any() else 0
        assert found.n_parameters == rank
        probability = found.expected_weight(dyads)
        np.testing.assert_array_equal(probability[~free], dyads.links[~free])
        for got, wanted in zip(dyads.node_sums(probability), dyads.node_sums(dyads.links * 1.0), strict=True):
            np.testing.assert_allclose(got, wanted, atol=1e-8)


@pytest.mark.parametrize("directed", [True, False])
@pytest.mark.parametrize("masked", [True, False])
def test_it_is_the_logit_with_node_indicators(directed: bool, masked: bool) -> None:
    """Log-likelihood to 1e-10 and probabilities to 1e-8 of statsmodels' binomial GLM on the free dyads."""
    dyads = dyads_of(random_links(14, 0.4, directed, 3), directed)
    if masked:
        dyads = dyads.select(np.random.default_rng(1).random((14, 14)) < 0.8)
    found = ConfigurationModel().fit(dyads)
    free = free_dyads(found, dyads)
    assert free.sum() > 40
    design = indicators(dyads)[free]
    links = dyads.links[free].astype(float)
    # One column of each linear dependency goes.
    kept: list[int] = []
    for column in range(design.shape[1]):
        if np.linalg.matrix_rank(design[:, [*kept, column]]) > len(kept):
            kept.append(column)
    outside = sm.GLM(links, design[:, kept], family=sm.families.Binomial()).fit(tol=1e-14, maxiter=100)
    ours = found.distribution(dyads).log_density(dyads.links.astype(float))
    np.testing.assert_array_equal(ours[~free], 0.0)
    assert ours.sum() == pytest.approx(outside.llf, rel=1e-10)
    np.testing.assert_allclose(found.expected_weight(dyads)[free], outside.fittedvalues, atol=1e-8)
    assert found.n_parameters == len(kept)


@pytest.mark.parametrize("directed", [True, False])
def test_standard_errors_are_those_of_the_constrained_information(directed: bool) -> None:
    """Model errors: the Moore-Penrose inverse of the indicators' information. Robust ones: its sandwich.

    Directed, the gauge in which log x and log y have equal sums is the one perpendicular to its null space.
    """
    n = 12
    dyads = dyads_of(random_links(n, 0.5, directed, 8), directed)
    found = ConfigurationModel().fit(dyads)
    assert found.n_parameters == (2 * n - 1 if directed else n)
    design, p = indicators(dyads), found.expected_weight(dyads)
    bread = np.linalg.pinv((design.T * (p * (1 - p))) @ design, rcond=1e-12, hermitian=True)
    meat = (design.T * (dyads.links - p) ** 2) @ design
    size, k = len(dyads), found.n_parameters
    robust = size / (size - k) * bread @ meat @ bread
    rows = list(found.estimates)
    assert [r.term for r in rows[:2]] == (
        ["node:n0:origin", "node:n1:origin"] if directed else ["node:n0", "node:n1"]
    )
    assert all(r.part is EstimatePart.LINKS and r.status is Status.FREE for r in rows)
    for kind, matrix in ((ErrorKind.MODEL, bread), (ErrorKind.ROBUST, robust)):
        errors = [r.standard_errors[kind] for r in rows]
        np.testing.assert_allclose(errors, np.sqrt(np.diag(matrix)), rtol=1e-7)
    values = np.array([r.value for r in rows])
    np.testing.assert_allclose(design @ values, found.log_odds(dyads), rtol=1e-12, atol=1e-12)
    if directed:
        assert values[:n].sum() == pytest.approx(values[n:].sum(), abs=1e-9)


@pytest.mark.parametrize("directed", [True, False])
def test_every_small_graph(directed: bool) -> None:
    """All networks on 3 directed or 4 undirected nodes: the fitted law is normalised over all of them.

    Its degrees, averaged over every graph with its probability, are the observed ones: the definition of the
    ensemble, with no formula of ours.
    """
    n = 3 if directed else 4
    pairs = list((permutations if directed else combinations)(range(n), 2))
    graphs = []
    for bits in product((0.0, 1.0), repeat=len(pairs)):
        links = np.zeros((n, n))
        for (i, j), bit in zip(pairs, bits, strict=True):
            links[i, j] = bit
        graphs.append(links)
    everything = dyads_of(graphs[-1], directed)
    observations = [g[everything.origin, everything.destination] for g in graphs]
    degrees = np.array([np.concatenate(everything.node_sums(o)) for o in observations])
    for position, links in enumerate(graphs):
        dyads = dyads_of(links, directed)
        law = ConfigurationModel().fit(dyads).distribution(dyads)
        mass = np.exp([law.log_density(o).sum() for o in observations])
        assert mass.sum() == pytest.approx(1.0, abs=1e-12)
        np.testing.assert_allclose(mass @ degrees, degrees[position], atol=1e-8)


def test_of_all_laws_with_these_degrees_it_has_the_largest_entropy() -> None:
    """Along every direction that keeps all degrees the entropy falls."""
    dyads = dyads_of(random_links(8, 0.5, False, 4), directed=False)
    found = ConfigurationModel().fit(dyads)
    free = free_dyads(found, dyads)
    p = found.expected_weight(dyads)[free]
    margins = indicators(dyads)[free].T
    _, singular, rows = np.linalg.svd(margins)
    directions = rows[int((singular > 1e-9).sum()) :]
    assert len(directions) > 3

    def entropy(q: Floats) -> float:
        return float(-(q * np.log(q) + (1 - q) * np.log1p(-q)).sum())

    for direction in directions:
        step = 0.2 * np.minimum(p, 1 - p).min() * direction / np.abs(direction).max()
        assert entropy(p + step) < entropy(p)
        assert entropy(p - step) < entropy(p)


def test_a_bipartite_network_has_a_gauge() -> None:
    """Undirected, two sides, all dyads within a side outside the sample: one side up, the other down.

    K(3,3) less a perfect matching: degrees 2 everywhere, so p = 2/3 on all nine known dyads; five parameters.
    """
    links = np.zeros((6, 6))
    links[:3, 3:] = 1 - np.eye(3)
    mask = np.zeros((6, 6), dtype=bool)
    mask[:3, 3:] = True
    dyads = dyads_of(links, directed=False)
    found = ConfigurationModel().fit(dyads.select(mask))
    assert found.convergence.converged
    assert found.n_parameters == 5 == np.linalg.matrix_rank(indicators(dyads.select(mask)))
    np.testing.assert_allclose(found.expected_weight(dyads.select(mask)), 2 / 3, rtol=1e-10)
    # Within a side nothing is known: the density of the training dyads.
    np.testing.assert_allclose(found.expected_weight(dyads.select(~mask)), 2 / 3, rtol=1e-10)


def test_regular_networks_in_closed_form() -> None:
    """All degrees k: p = k / (N - 1), log fitness half its log odds, and the density model's log-likelihood."""
    n, k = 11, 4
    graph = nx.circulant_graph(n, [1, 2])
    dyads = dyads_of(nx.to_numpy_array(graph), directed=False)
    found = ConfigurationModel().fit(dyads)
    p = k / (n - 1)
    np.testing.assert_allclose(found.expected_weight(dyads), p, rtol=1e-12)
    np.testing.assert_allclose([e.value for e in found.estimates], 0.5 * np.log(p / (1 - p)), rtol=1e-12)
    a = dyads.links.astype(float)
    density = DensityModel().fit(dyads).distribution(dyads)
    assert found.distribution(dyads).log_density(a).sum() == pytest.approx(
        density.log_density(a).sum(), rel=1e-12
    )


def test_two_kinds_of_nodes_in_closed_form() -> None:
    """The path on four nodes: 1-2 sure, 0-3 never, and the four dyads between ends and middle at 1/2."""
    links = np.zeros((4, 4))
    links[0, 1] = links[1, 2] = links[2, 3] = 1
    dyads = dyads_of(links, directed=False)
    found = ConfigurationModel().fit(dyads)
    by_pair = dict(
        zip(
            zip(dyads.origin.tolist(), dyads.destination.tolist(), strict=True),
            found.expected_weight(dyads).tolist(),
            strict=True,
        )
    )
    assert by_pair == {(0, 1): 0.5, (0, 2): 0.5, (0, 3): 0.0, (1, 2): 1.0, (1, 3): 0.5, (2, 3): 0.5}
    # Ends against middle: a bipartite component, 4 - 1 parameters.
    assert found.n_parameters == 3


def test_a_wheel_solved_by_one_equation() -> None:
    """A hub of degree m to a cycle of m: after the full hub goes, a cycle is regular: p = 2 / (m - 1)."""
    m = 7
    graph = nx.wheel_graph(m + 1)
    dyads = dyads_of(nx.to_numpy_array(graph), directed=False)
    found = ConfigurationModel().fit(dyads)
    hub = (dyads.origin == 0) | (dyads.destination == 0)
    np.testing.assert_array_equal(found.expected_weight(dyads)[hub], 1.0)
    np.testing.assert_allclose(found.expected_weight(dyads)[~hub], 2 / (m - 1), rtol=1e-12)
    assert found.estimates.row("node:n0").value == np.inf
    assert found.estimates.row("node:n0").status is Status.BOUNDARY
    assert found.n_parameters == m
    assert "1 node fitness at the boundary: n0" in found.convergence.message


def test_two_degrees_against_a_root_finder() -> None:
    """Complete bipartite-like degrees solved apart: x x / (1 + x x) and x y / (1 + x y) by a scalar search.

    Four nodes of degree 3 and four of degree 2: y follows from x, one unknown is left.
    """
    graph = nx.Graph()
    heavy, light = range(4), range(4, 8)
    graph.add_edges_from([(0, 1), (2, 3), (0, 4), (0, 5), (1, 5), (1, 6), (2, 6), (2, 7), (3, 7), (3, 4)])
    assert [graph.degree(i) for i in [*heavy, *light]] == [3] * 4 + [2] * 4
    dyads = dyads_of(nx.to_numpy_array(graph, nodelist=range(8)), directed=False)
    found = ConfigurationModel().fit(dyads)

    def cross(u: float) -> float:
        """Log fitness of light nodes that gives heavy ones degree 3."""
        rest = (3 - 3 * expit(2 * u)) / 4
        return float(np.log(rest / (1 - rest)) - u)

    u = brentq(lambda u: 3 * expit(2 * cross(u)) + 4 * expit(u + cross(u)) - 2, -0.5, 2.0, xtol=1e-14)
    got = [e.value for e in found.estimates]
    np.testing.assert_allclose(got, [u] * 4 + [cross(u)] * 4, atol=1e-9)


@pytest.mark.parametrize("value", [0.0, 1.0])
def test_empty_and_full_networks(value: float) -> None:
    """Nothing is free: no parameter, a certified fit, and probabilities of 0 or 1."""
    links = np.full((5, 5), value)
    np.fill_diagonal(links, 0)
    for directed in (True, False):
        dyads = dyads_of(links, directed)
        found = ConfigurationModel().fit(dyads)
        assert found.n_parameters == 0
        assert found.convergence.converged
        np.testing.assert_array_equal(found.expected_weight(dyads), value)
        assert all(e.value == (np.inf if value else -np.inf) for e in found.estimates)


def test_nodes_outside_the_sample_get_the_density() -> None:
    """A node none of whose dyads are in the sample: nothing is known, so its dyads have the density's odds."""
    links = random_links(9, 0.5, True, 2)
    mask = np.ones((9, 9), dtype=bool)
    mask[0, :] = mask[:, 0] = False
    dyads = dyads_of(links, directed=True)
    found = ConfigurationModel().fit(dyads.select(mask))
    share = dyads.select(mask).links.mean()
    np.testing.assert_allclose(found.expected_weight(dyads.select(~mask)), share, rtol=1e-12)


def test_density_in_closed_form() -> None:
    """p = L / D; the constant its log odds; model error 1 / sqrt(D p (1 - p)); robust with D / (D - 1)."""
    dyads = dyads_of(random_links(10, 0.3, True, 5), directed=True)
    found = DensityModel().fit(dyads)
    n, p = len(dyads), dyads.n_links / len(dyads)
    np.testing.assert_allclose(found.expected_weight(dyads), p, rtol=1e-12)
    row = found.estimates.row("constant")
    assert row.value == pytest.approx(np.log(p / (1 - p)), rel=1e-12)
    assert row.standard_errors[ErrorKind.MODEL] == pytest.approx(1 / np.sqrt(n * p * (1 - p)), rel=1e-10)
    assert row.standard_errors[ErrorKind.ROBUST] == pytest.approx(
        1 / np.sqrt((n - 1) * p * (1 - p)), rel=1e-10
    )
    law = found.distribution(dyads).log_density(dyads.links.astype(float)).sum()
    assert law == pytest.approx(n * (p * np.log(p) + (1 - p) * np.log(1 - p)), rel=1e-12)
    assert found.n_parameters == 1
