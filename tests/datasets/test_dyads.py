"""Dyads: which they are, in what order, and what a model can and cannot reach through them."""

from __future__ import annotations

import pickle
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.sparse import csr_array

from steelyard.datasets import (
    CovariateError,
    DataError,
    DyadCovariate,
    Dyads,
    End,
    FlowNetwork,
    MatchCovariate,
    NodeCovariate,
    Provenance,
    Transform,
)

COVARIATES = {
    "size": NodeCovariate("size", End.BOTH, Transform.LOG),
    "road": DyadCovariate("road"),
    "kin": MatchCovariate("tribe"),
}


def matrices(n: int, seed: int, *, directed: bool) -> tuple[Any, Any]:
    """(flows, road lengths), both with distinct cells so that a wrong pick shows."""
    rng = np.random.default_rng(seed)
    flows = np.where(rng.random((n, n)) < 0.5, rng.permutation(n * n).reshape(n, n) + 1.25, 0.0)
    np.fill_diagonal(flows, 0.0)
    return (flows if directed else np.triu(flows, 1)), rng.permutation(n * n).reshape(n, n) + 1.0


def dyads_of(
    n: int = 6,
    seed: int = 3,
    *,
    directed: bool = True,
    unit: float = 1.0,
    flows: Any = None,
    mask: Any = None,
) -> Dyads:
    made, road = matrices(n, seed, directed=directed)
    network = FlowNetwork(
        tuple(f"port {i}" for i in range(n)),
        csr_array(made if flows is None else flows),
        directed,
        unit,
        {"size": np.arange(1.0, n + 1), "tribe": np.array([str(i % 2) for i in range(n)])},
        {"road": road},
        Provenance("invented"),
    )
    return Dyads(network, COVARIATES, mask)


def pairs(dyads: Dyads) -> list[tuple[int, int]]:
    return list(zip(dyads.origin.tolist(), dyads.destination.tolist(), strict=True))


def expected_pairs(n: int, directed: bool, mask: Any = None) -> list[tuple[int, int]]:
    return [
        (i, j)
        for i in range(n)
        for j in range(n)
        if (i != j if directed else i < j) and (mask is None or mask[i, j])
    ]


@pytest.mark.parametrize("directed", [True, False])
def test_order_is_by_origin_then_destination(directed: bool) -> None:
    dyads = dyads_of(directed=directed)
    flows, road = matrices(6, 3, directed=directed)
    expected = expected_pairs(6, directed)
    assert pairs(dyads) == expected
    assert len(dyads) == len(expected) == 30 // (1 if directed else 2)
    assert dyads.weights.tolist() == [flows[i, j] for i, j in expected]
    assert dyads.column("road").tolist() == [road[i, j] for i, j in expected]
    assert dyads.origin.dtype == dyads.destination.dtype == np.int64


@settings(deadline=None, max_examples=30)
@given(
    n=st.integers(3, 9),
    seed=st.integers(0, 99),
    directed=st.booleans(),
    most=st.integers(0, 40),
    share=st.sampled_from([0.0, 0.3, 1.0]),
)
def test_blocks_cover_every_dyad_once_in_order(
    n: int, seed: int, directed: bool, most: int, share: float
) -> None:
    mask = np.random.default_rng(seed).random((n, n)) < share
    whole = dyads_of(n, seed, directed=directed).select(mask)
    blocks = list(whole.blocks(most))
    assert pairs(whole) == expected_pairs(n, directed, mask)
    assert [pair for block in blocks for pair in pairs(block)] == pairs(whole)
    assert sum(len(block) for block in blocks) == len(whole) == len(pairs(whole))
    assert all(len(block) <= max(most, n) for block in blocks)
    for name in ("weights", "links", "counts"):
        parts = np.concatenate([getattr(block, name) for block in blocks])
        np.testing.assert_array_equal(parts, getattr(whole, name))
    design = np.concatenate([block.design(list(COVARIATES)) for block in blocks])
    np.testing.assert_array_equal(design, whole.design(list(COVARIATES)))


def test_blocks_of_a_block_stay_inside_it() -> None:
    block = list(dyads_of().blocks(most=18))[1]
    assert {i for i, _ in pairs(block)} == {3, 4, 5}
    assert [p for b in block.blocks(most=1) for p in pairs(b)] == pairs(block)
    assert pairs(block.select(np.eye(6, k=-1, dtype=bool))) == [(3, 2), (4, 3), (5, 4)]


def test_select_narrows_and_never_widens() -> None:
    rng = np.random.default_rng(1)
    one, two = rng.random((6, 6)) < 0.6, rng.random((6, 6)) < 0.6
    found = dyads_of().select(one).select(two)
    assert pairs(found) == expected_pairs(6, True, one & two)
    assert pairs(found.select(np.ones((6, 6), dtype=bool))) == pairs(found)
    assert pairs(dyads_of(mask=one).select(two)) == pairs(found)


def test_an_undirected_view_reads_the_upper_triangle_of_a_mask_only() -> None:
    mask = np.tril(np.ones((6, 6), dtype=bool))
    assert len(dyads_of(directed=False).select(mask)) == 0
    assert pairs(dyads_of(directed=False, mask=mask.T)) == expected_pairs(6, False)


@pytest.mark.parametrize(
    "mask", [np.ones((5, 5), bool), np.ones(6, bool), np.ones((6, 6)), np.ones((1, 6), bool)]
)
def test_a_mask_of_another_shape_or_type_is_refused(mask: Any) -> None:
    """A row of six would broadcast, and numbers would select by position, both in silence."""
    with pytest.raises(DataError, match="a mask must be 6 x 6 booleans; got"):
        dyads_of(mask=mask)
    with pytest.raises(DataError, match="a mask must be 6 x 6 booleans; got"):
        dyads_of().select(mask)


def test_a_mask_changed_later_changes_nothing() -> None:
    mask = np.ones((6, 6), dtype=bool)
    built, selected = dyads_of(mask=mask), dyads_of().select(mask)
    mask[:] = False
    assert len(built) == len(selected) == 30


def test_unit_and_counts() -> None:
    """Rounded half to even, and a link never rounds to nothing."""
    flows = np.zeros((3, 3))
    cells = [(0, 1), (0, 2), (1, 0), (1, 2), (2, 0)]
    for cell, amount in zip(cells, [1.0, 249.0, 250.0, 150.0, 12_345.0], strict=True):
        flows[cell] = amount
    dyads = dyads_of(3, flows=flows, unit=100.0)
    assert dyads.weights.tolist() == [0.01, 2.49, 2.5, 1.5, 123.45, 0.0]
    assert dyads.counts.tolist() == [1.0, 2.0, 2.0, 2.0, 123.0, 0.0]
    assert dyads.links.tolist() == [True] * 5 + [False]
    assert (dyads.n_links, dyads.unit) == (5, 100.0)


@pytest.mark.parametrize("directed", [True, False])
def test_node_sums_agree_with_a_double_loop(directed: bool) -> None:
    mask = np.random.default_rng(8).random((6, 6)) < 0.7
    dyads = dyads_of(directed=directed).select(mask)
    values = np.random.default_rng(9).normal(size=len(dyads))
    out, into = np.zeros(6), np.zeros(6)
    for (i, j), value in zip(pairs(dyads), values, strict=True):
        out[i] += value
        into[j] += value
        if not directed:
            out[j] += value
            into[i] += value
    for found, expected in zip(dyads.node_sums(values), (out, into), strict=True):
        np.testing.assert_allclose(found, expected, rtol=1e-14, atol=1e-14)


def test_node_sums_of_an_empty_view_are_zeros_and_wrong_lengths_fail() -> None:
    nothing = dyads_of().select(np.zeros((6, 6), dtype=bool))
    assert [sums.tolist() for sums in nothing.node_sums(np.empty(0))] == [[0.0] * 6] * 2
    assert nothing.design(["size"]).shape == (0, 2)
    with pytest.raises(ValueError, match="length"):
        dyads_of().node_sums(np.ones(5))


def test_design_has_a_constant_and_the_columns_as_ordered() -> None:
    dyads = dyads_of()
    design = dyads.design(["road", "size"])
    assert design.shape == (30, 3)
    np.testing.assert_array_equal(design[:, 0], 1.0)
    np.testing.assert_array_equal(design[:, 1], dyads.column("road"))
    np.testing.assert_array_equal(design[:, 2], dyads.column("size"))
    assert dyads.design([]).shape == (30, 1)
    with pytest.raises(CovariateError, match="no covariate 'rode'; did you mean 'road'"):
        dyads.design(["rode"])


# --- the digest


def test_the_digest_changes_with_what_is_observed_and_on_which_dyads() -> None:
    flows, _ = matrices(6, 3, directed=True)
    more = flows.copy()
    more[0, 1] += 1.0
    mask = ~np.eye(6, k=1, dtype=bool)
    variants = [dyads_of(), dyads_of(flows=more), dyads_of(unit=2.0), dyads_of(mask=mask)]
    variants += [dyads_of(mask=mask.T), dyads_of(flows=np.triu(flows)), dyads_of(flows=flows * 2, unit=2.0)]
    variants.append(dyads_of(flows=np.triu(flows), directed=False))
    assert len({dyads.digest for dyads in variants}) == len(variants)
    assert dyads_of().digest == dyads_of().digest
    assert dyads_of().select(mask).digest == dyads_of(mask=mask).digest


def test_the_digest_does_not_depend_on_flows_outside_the_view() -> None:
    flows, _ = matrices(6, 3, directed=True)
    mask = np.random.default_rng(2).random((6, 6)) < 0.5
    other = np.where(mask, flows, 77.0)
    np.fill_diagonal(other, 0.0)
    assert dyads_of(flows=other).digest != dyads_of().digest
    assert dyads_of(flows=other, mask=mask).digest == dyads_of(mask=mask).digest


def public_values(dyads: Dyads) -> dict[str, Any]:
    """Whatever a plugin can read without reaching for a private name."""
    found: dict[str, Any] = {"len": len(dyads)}
    for name in (name for name in dir(Dyads) if not name.startswith("_")):
        member = getattr(dyads, name)
        calls = {
            "column": lambda f: [f(c).tolist() for c in COVARIATES],
            "node_column": lambda f: [f(c).tolist() for c in ("size", "tribe")],
            "design": lambda f: f(list(COVARIATES)).tolist(),
            "node_sums": lambda f: [s.tolist() for s in f(dyads.weights)],
            "select": lambda f: f(np.ones((6, 6), dtype=bool)).weights.tolist(),
            "with_column": lambda f: f("new", np.zeros(len(dyads))).weights.tolist(),
            "blocks": lambda f: [block.weights.tolist() for block in f(6)],
        }
        found[name] = calls[name](member) if callable(member) else np.asarray(member).tolist()
    return found


def test_flows_outside_the_view_cannot_be_reached_through_public_members() -> None:
    """Two networks that differ only outside the mask look the same; a new public member must be added above."""
    flows, _ = matrices(6, 3, directed=True)
    mask = np.random.default_rng(4).random((6, 6)) < 0.5
    other = np.where(mask, flows, np.where(flows > 0, 0.0, 77.0))
    np.fill_diagonal(other, 0.0)
    one, two = dyads_of(mask=mask), dyads_of(flows=other, mask=mask)
    assert dyads_of().weights.tolist() != dyads_of(flows=other).weights.tolist()
    assert public_values(one) == public_values(two)


# --- nobody changes the data, and views travel


@pytest.mark.parametrize("pickled", [False, True])
def test_kept_arrays_are_read_only_and_fresh_ones_are_copies(pickled: bool) -> None:
    dyads = pickle.loads(pickle.dumps(dyads_of())) if pickled else dyads_of()
    kept = [
        dyads.origin,
        dyads.destination,
        dyads.weights,
        dyads.links,
        dyads.counts,
        dyads.node_column("size"),
    ]
    for values in kept:
        with pytest.raises(ValueError, match="read-only"):
            values[0] = 0
    for name in COVARIATES:
        before = dyads.column(name).copy()
        changed = dyads.column(name)
        changed[:] = -5.0
        np.testing.assert_array_equal(dyads.column(name), before)


@pytest.mark.parametrize("directed", [True, False])
def test_an_unpickled_view_behaves_the_same_and_leaves_caches_behind(directed: bool) -> None:
    mask = np.random.default_rng(5).random((6, 6)) < 0.6
    dyads = dyads_of(directed=directed, unit=3.0).select(mask)
    fresh = pickle.dumps(dyads)
    before = public_values(dyads)
    grown = pickle.dumps(dyads)
    assert len(grown) - len(fresh) < 120  # the digest, which costs more to make than to send
    assert public_values(pickle.loads(fresh)) == public_values(pickle.loads(grown)) == before


def test_a_pickle_holds_each_matrix_once() -> None:
    """120 x 120 numbers are 115 kB: the road lengths as a covariate, not the column they came from as well."""
    size = len(pickle.dumps(dyads_of(120, flows=np.eye(120, k=1))))
    assert 115_200 < size < 1.5 * 115_200


def test_two_thousand_nodes_stay_in_small_blocks() -> None:
    n = 2_000
    network = FlowNetwork(
        tuple(map(str, range(n))), csr_array((n, n)), True, 1.0, {}, {}, Provenance("invented")
    )
    dyads = Dyads(network)
    assert len(dyads) == n * (n - 1)
    assert "_ends" not in vars(dyads)  # counted, not listed
    block = next(dyads.blocks(100_000))
    assert len(block) == 50 * (n - 1)
    assert block.weights.shape == (len(block),)
    assert "_ends" not in vars(dyads)
