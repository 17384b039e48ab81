"""Poisson with node effects: the same fit as with a column of zeros and ones for each node."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest
import statsmodels.api as sm
from scipy.sparse import csr_array

from steelyard.datasets import (
    DyadCovariate,
    Dyads,
    Floats,
    FlowNetwork,
    Provenance,
    Transform,
    dataset_registry,
)
from steelyard.models import ErrorKind, ModelError, Status
from steelyard.models.checks import EXAMPLE_COVARIATES, ExampleFlows
from steelyard.models.covariance import node_clustered_meat
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.models.effect_fit import EffectFit, fit_effects
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.linear_index import node_pairs
from steelyard.models.node_effects import NodeEffects
from steelyard.models.special import poisson_log_mass

KINDS = [
    (NodeEffects.ORIGIN_AND_DESTINATION, True),
    (NodeEffects.ORIGIN, True),
    (NodeEffects.DESTINATION, True),
    (NodeEffects.NODE, True),
    (NodeEffects.NODE, False),
]
OPTIONS = {
    NodeEffects.ORIGIN_AND_DESTINATION: {"origin_effects": True, "destination_effects": True},
    NodeEffects.ORIGIN: {"origin_effects": True},
    NodeEffects.DESTINATION: {"destination_effects": True},
    NodeEffects.NODE: {"node_effects": True},
}


def indicators(kind: NodeEffects, dyads: Dyads) -> Floats:
    """(n, P) a column for each effect, in the order of the rows of the estimates."""
    n = dyads.n_nodes
    origin, destination = np.eye(n)[dyads.origin], np.eye(n)[dyads.destination]
    return {
        NodeEffects.ORIGIN: origin,
        NodeEffects.DESTINATION: destination,
        NodeEffects.ORIGIN_AND_DESTINATION: np.hstack([origin, destination]),
        NodeEffects.NODE: origin + destination,
    }[kind]


def example(directed: bool, masked: bool) -> Dyads:
    """The contract's example and a covariate that varies over dyads and directions."""
    flows = ExampleFlows(directed)
    own = flows.dyads
    n = own.n_nodes
    weights = np.zeros((n, n))
    weights[own.origin, own.destination] = own.weights
    tie = np.random.default_rng(4).normal(size=(n, n))
    tie = tie if directed else tie + tie.T
    distance = np.ones((n, n))
    distance[own.origin, own.destination] = np.exp(own.column("distance"))
    distance = distance if directed else distance * distance.T
    network = FlowNetwork(
        own.labels,
        csr_array(weights),
        directed,
        1.0,
        {},
        {"distance": distance, "tie": tie},
        Provenance("made in a test"),
    )
    dyads = Dyads(
        network,
        {
            "distance": DyadCovariate("distance", Transform.LOG),
            "tie": DyadCovariate("tie", Transform.NONE),
        },
    )
    return dyads.select(flows.training_mask()) if masked else dyads


def dense(kind: NodeEffects, dyads: Dyads, columns: Floats) -> IndexFit:
    """The same model with a column for each effect; the covariates come last."""
    design = np.column_stack([np.ones(len(dyads)), indicators(kind, dyads), columns])
    return fit_indices(Poisson(dyads.counts), [design], node_pairs(dyads))


def absorbed(kind: NodeEffects, dyads: Dyads, columns: Floats) -> EffectFit:
    ends = kind.ends(dyads.origin, dyads.destination, dyads.n_nodes)
    return fit_effects(dyads.counts, columns, ends, node_pairs(dyads))


@pytest.mark.parametrize("masked", [False, True])
@pytest.mark.parametrize(("kind", "directed"), KINDS)
def test_it_is_the_fit_with_a_column_for_each_node(kind: NodeEffects, directed: bool, masked: bool) -> None:
    dyads = example(directed, masked)
    columns = dyads.design(("distance", "tie"))[:, 1:]
    found, wanted = absorbed(kind, dyads, columns), dense(kind, dyads, columns)
    assert found.convergence.converged
    assert wanted.convergence.converged
    assert found.rank == wanted.rank
    np.testing.assert_allclose(found.slopes, wanted.coefficients[0][-2:], rtol=1e-8, atol=1e-10)
    for kind_of_error in (ErrorKind.MODEL, ErrorKind.ROBUST):
        block = wanted.covariances[kind_of_error][-2:, -2:]
        np.testing.assert_allclose(found.covariances[kind_of_error], block, rtol=1e-8, atol=1e-14)


@pytest.mark.parametrize("masked", [False, True])
@pytest.mark.parametrize(("kind", "directed"), KINDS)
def test_node_clustered_errors_are_the_block_of_the_full_sandwich(
    kind: NodeEffects, directed: bool, masked: bool
) -> None:
    """Without the repair of negative eigenvalues, which looks at the whole matrix in the one case only."""
    dyads = example(directed, masked)
    columns = dyads.design(("distance", "tie"))[:, 1:]
    found = absorbed(kind, dyads, columns)
    if ErrorKind.NODE_CLUSTERED in found.repaired:
        pytest.skip("repaired, so there is no identity to check")
    design = np.column_stack([indicators(kind, dyads), columns])
    mean = fitted_mean(kind, dyads, columns)
    bread = np.linalg.pinv((design.T * mean) @ design, rcond=1e-13)
    meat = node_clustered_meat((dyads.counts - mean)[:, None] * design, node_pairs(dyads))
    full = (bread @ meat @ bread)[-2:, -2:]
    np.testing.assert_allclose(found.covariances[ErrorKind.NODE_CLUSTERED], full, rtol=1e-7, atol=1e-13)


def fitted_mean(kind: NodeEffects, dyads: Dyads, columns: Floats) -> Floats:
    found = absorbed(kind, dyads, columns)
    ends = kind.ends(dyads.origin, dyads.destination, dyads.n_nodes)
    return np.exp(found.first[ends.first] + found.second[ends.second] + columns @ found.slopes)


@pytest.mark.parametrize(("kind", "directed"), KINDS)
def test_effects_and_their_errors_in_the_stated_gauge(kind: NodeEffects, directed: bool) -> None:
    """Model and robust errors from the pseudo-inverse of the full information, which is of that very gauge."""
    dyads = example(directed, masked=True)
    fitted = PoissonModel(("distance", "tie"), **OPTIONS[kind]).fit(dyads)
    rows = [e for e in fitted.estimates if e.term.startswith("node:")]
    effects = np.array([e.value for e in rows])
    design = np.column_stack([indicators(kind, dyads), dyads.design(("distance", "tie"))[:, 1:]])
    mean = fitted.expected_weight(dyads)
    slopes = [fitted.estimates.row(t).value for t in ("distance", "tie")]
    np.testing.assert_allclose(np.exp(design @ np.array([*effects, *slopes])), mean, rtol=1e-12)
    if kind is NodeEffects.ORIGIN_AND_DESTINATION:
        n = dyads.n_nodes
        assert effects[:n].sum() == pytest.approx(effects[n:].sum(), abs=1e-9)
    scale = np.sqrt((design**2).mean(axis=0))
    scale[: len(effects)] = 1.0
    bread = np.linalg.pinv(
        (design / scale).T @ ((design / scale) * mean[:, None]), rcond=1e-13, hermitian=True
    )
    score = (dyads.counts - mean)[:, None] * (design / scale)
    n, k = len(dyads), fitted.n_parameters
    wanted = {ErrorKind.MODEL: bread, ErrorKind.ROBUST: n / (n - k) * bread @ score.T @ score @ bread}
    for error, matrix in wanted.items():
        got = [e.standard_errors[error] for e in rows]
        np.testing.assert_allclose(got, np.sqrt(np.diag(matrix))[: len(rows)], rtol=1e-7)
        assert all(ErrorKind.NODE_CLUSTERED not in e.standard_errors for e in rows)


@pytest.mark.parametrize("masked", [False, True])
@pytest.mark.parametrize(("kind", "directed"), KINDS)
def test_strengths_and_log_likelihood(kind: NodeEffects, directed: bool, masked: bool) -> None:
    dyads = example(directed, masked)
    fitted = PoissonModel(("distance", "tie"), **OPTIONS[kind]).fit(dyads)
    mean = fitted.expected_weight(dyads)
    design = indicators(kind, dyads)
    sums = design.T @ dyads.counts
    assert (np.abs(design.T @ mean - sums) / np.maximum(1.0, sums)).max() < 1e-8
    columns = dyads.design(("distance", "tie"))[:, 1:]
    wanted = dense(kind, dyads, columns)
    full = np.column_stack([np.ones(len(dyads)), design, columns])
    best = poisson_log_mass(dyads.counts, np.exp(full @ wanted.coefficients[0])).sum()
    assert poisson_log_mass(dyads.counts, mean).sum() == pytest.approx(best, rel=1e-11)


@pytest.mark.parametrize("directed", [True, False])
def test_states_against_statsmodels_with_dummies(directed: bool) -> None:
    """Flights between states: statsmodels' Poisson GLM with a dummy for each effect, tightened to 1e-14."""
    network = dataset_registry().get("state-air-2008").load(directed=directed)
    dyads = Dyads(network, {"distance": DyadCovariate("distance", Transform.LOG)})
    kind = NodeEffects.ORIGIN_AND_DESTINATION if directed else NodeEffects.NODE
    fitted = PoissonModel(("distance",), **OPTIONS[kind]).fit(dyads)
    n = dyads.n_nodes
    # One destination is left out: 2N - 1 effects.
    design = np.column_stack([dyads.column("distance"), indicators(kind, dyads)[:, : 2 * n - 1]])
    with np.errstate(all="ignore"):
        wanted = sm.GLM(dyads.counts, design, family=sm.families.Poisson()).fit(tol=1e-14, maxiter=200)
        robust = sm.GLM(dyads.counts, design, family=sm.families.Poisson()).fit(
            tol=1e-14, maxiter=200, cov_type="HC0"
        )
    row = fitted.estimates.row("distance")
    assert fitted.n_parameters == np.linalg.matrix_rank(design)
    assert row.value == pytest.approx(wanted.params[0], rel=1e-8)
    assert row.standard_errors[ErrorKind.MODEL] == pytest.approx(wanted.bse[0], rel=1e-7)
    factor = np.sqrt(len(dyads) / (len(dyads) - fitted.n_parameters))
    assert row.standard_errors[ErrorKind.ROBUST] == pytest.approx(factor * robust.bse[0], rel=1e-7)
    ours = poisson_log_mass(dyads.counts, fitted.expected_weight(dyads)).sum()
    assert ours >= wanted.llf - 1e-8 * abs(wanted.llf)
    assert ours == pytest.approx(wanted.llf, rel=1e-8)


def test_without_covariates_a_full_bipartite_sample_has_the_closed_form() -> None:
    """On all dyads from one half of the nodes to the other the mean is out-strength x in-strength / total."""
    dyads = ExampleFlows(True).dyads
    mask = np.zeros((24, 24), dtype=bool)
    mask[:12, 12:] = True
    half = dyads.select(mask)
    fitted = PoissonModel((), origin_effects=True, destination_effects=True).fit(half)
    out, into = half.node_sums(half.counts)
    wanted = out[half.origin] * into[half.destination] / half.counts.sum()
    np.testing.assert_allclose(fitted.expected_weight(half), wanted, rtol=1e-9, atol=1e-12)
    assert fitted.n_parameters == np.count_nonzero(out) + np.count_nonzero(into) - 1


@pytest.mark.parametrize("scale", [1e-9, 1e-3, 1e6])
def test_units_of_covariates_do_not_matter(scale: float) -> None:
    dyads = example(True, masked=False)
    columns = dyads.design(("distance", "tie"))[:, 1:]
    kind = NodeEffects.ORIGIN_AND_DESTINATION
    plain, other = absorbed(kind, dyads, columns), absorbed(kind, dyads, columns * [1.0, scale] + [1e3, 0.0])
    np.testing.assert_allclose(other.slopes * [1.0, scale], plain.slopes, rtol=1e-8)
    got, wanted = (np.diag(f.covariances[ErrorKind.NODE_CLUSTERED]) for f in (other, plain))
    np.testing.assert_allclose(got * [1.0, scale**2], wanted, rtol=1e-7)


def test_columns_that_effects_contain_are_set_aside() -> None:
    """A sum of node values under origin and destination effects, exactly; under origin effects it is free."""
    dyads = ExampleFlows(True).dyads
    both = PoissonModel(EXAMPLE_COVARIATES, origin_effects=True, destination_effects=True).fit(dyads)
    size = both.estimates.row("size")
    assert (size.status, size.value) == (Status.FIXED, 0.0)
    assert size.note == "set aside: the effects already contain it"
    assert both.n_parameters == 2 * 24 - 1 + 1
    one = PoissonModel(EXAMPLE_COVARIATES, origin_effects=True).fit(dyads)
    assert one.estimates.row("size").status is Status.FREE
    assert one.n_parameters == 24 + 2


def test_equal_covariates_are_told_from_contained_ones() -> None:
    dyads = example(True, masked=False)
    column = dyads.column("tie")
    ends = NodeEffects.NODE.ends(dyads.origin, dyads.destination, dyads.n_nodes)
    found = fit_effects(dyads.counts, np.column_stack([column, 2.0 * column + 1.0]), ends)
    assert (found.aliased, found.contained) == ((1,), ())


def test_options_change_the_declarations_and_the_class_keeps_its_own() -> None:
    plain, effects = PoissonModel(("x",)), PoissonModel(("x",), origin_effects=True)
    amounts = PoissonModel(("x",), amounts=True)
    for declared in ("measure", "holdouts", "directed", "information"):
        assert getattr(PoissonModel, declared) == getattr(plain, declared)
    assert effects.directed == {True}
    assert PoissonModel(("x",), node_effects=True).directed == {True, False}
    assert {h.name for h in effects.holdouts} == {"DYADS", "PERIODS"}
    assert effects.information.value == "strengths"
    assert amounts.measure is None
    assert amounts.holdouts == plain.holdouts


def test_wrong_options_are_refused_in_one_sentence() -> None:
    with pytest.raises(ModelError, match="give either node_effects or origin_effects"):
        PoissonModel((), node_effects=True, origin_effects=True)
    with pytest.raises(ModelError, match="need a directed network; use node_effects = true there"):
        PoissonModel((), origin_effects=True).fit(ExampleFlows(False).dyads)


def test_too_few_dyads_are_refused() -> None:
    """A ring of flows: as many dyads as origins, of which each has an effect of its own."""
    n = 6
    flows, mask = np.zeros((n, n)), np.zeros((n, n), dtype=bool)
    for i in range(n):
        flows[i, (i + 1) % n] = i + 1.0
        mask[i, (i + 1) % n] = True
    network = FlowNetwork(tuple("abcdef"), csr_array(flows), True, 1.0, {}, {}, Provenance("made in a test"))
    with pytest.raises(ModelError, match="6 dyads that are not separated cannot identify 6 effects"):
        PoissonModel((), origin_effects=True).fit(Dyads(network).select(mask))


LARGE = """
import resource
import numpy as np
from scipy.sparse import csr_array
from steelyard.datasets import DyadCovariate, Dyads, FlowNetwork, Provenance, Transform
from steelyard.models.econometric.poisson import PoissonModel
n, rng = 1_000, np.random.default_rng(5)
x, y, language = rng.random(n), rng.random(n), rng.integers(0, 5, n)
columns = {
    "distance": np.log(np.hypot(x[:, None] - x, y[:, None] - y) + 0.01),
    "language": (language[:, None] == language) * 1.0,
    "tie": rng.normal(size=(n, n)),
}
mean = np.exp(-3 + rng.normal(size=(n, 1)) + rng.normal(size=n) - columns["distance"] + 0.5 * columns["language"])
flows = rng.poisson(rng.gamma(0.5, 2 * mean)).astype(float)
np.fill_diagonal(flows, 0)
labels = tuple(map(str, range(n)))
network = FlowNetwork(labels, csr_array(flows), True, 1.0, {}, columns, Provenance("made"))
dyads = Dyads(network, {name: DyadCovariate(name, Transform.NONE) for name in columns})
fitted = PoissonModel(tuple(columns), origin_effects=True, destination_effects=True).fit(dyads)
assert fitted.convergence.converged, fitted.convergence
truth = {"distance": -1.0, "language": 0.5, "tie": 0.0}
for name, value in truth.items():
    row = fitted.estimates.row(name)
    assert abs(row.value - value) < 5 * max(row.standard_errors.values()), row
for got, wanted in zip(dyads.node_sums(fitted.expected_weight(dyads)), dyads.node_sums(dyads.counts)):
    assert (abs(got - wanted) / np.maximum(1, wanted)).max() < 1e-8
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss)
"""


@pytest.mark.slow
def test_a_thousand_nodes_stay_below_two_gigabytes() -> None:
    """999,000 dyads, three covariates, both kinds of effects, in a process of its own."""
    done = subprocess.run([sys.executable, "-c", LARGE], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    # Kilobytes on Linux, bytes on macOS.
    peak = int(done.stdout) * (1 if sys.platform == "darwin" else 1024)
    assert peak < 2e9
