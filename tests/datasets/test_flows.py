"""FlowNetwork: what it refuses, that nobody can change it, and that it survives a trip to another process."""

from __future__ import annotations

import copy
import pickle
from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from scipy.sparse import coo_array, csr_array

from steelyard.datasets import DataError, FlowNetwork, Provenance

FLOWS = np.array([[0.0, 2.0, 0.0], [1.5, 0.0, 7.0], [0.0, 0.0, 0.0]])
LABELS = ("Ebb", "Flow", "Lee")


def network(
    flows: Any = FLOWS,
    *,
    labels: tuple[str, ...] = LABELS,
    directed: bool = True,
    unit: float = 1.0,
    nodes: Mapping[str, Any] | None = None,
    dyads: Mapping[str, Any] | None = None,
    period: str | None = None,
) -> FlowNetwork:
    source = Provenance("invented")
    return FlowNetwork(labels, csr_array(flows), directed, unit, nodes or {}, dyads or {}, source, period)


def test_counts_and_total() -> None:
    found = network()
    assert (found.n_nodes, found.n_dyads, found.n_links, found.total) == (3, 6, 3, 10.5)
    half = network(np.triu(FLOWS + FLOWS.T, 1), directed=False)
    assert (half.n_dyads, half.n_links, half.total) == (3, 2, 10.5)


@pytest.mark.parametrize("labels", [(), ("A",), ("A", "B")])
def test_fewer_than_three_places_are_refused(labels: tuple[str, ...]) -> None:
    n = len(labels)
    with pytest.raises(DataError, match=f"at least three places; got {n}: "):
        network(coo_array((max(n, 1), max(n, 1))), labels=labels)


def test_a_repeated_label_is_named() -> None:
    with pytest.raises(DataError, match="distinct; 'Flow' is repeated"):
        network(labels=("Flow", "Ebb", "Flow"))


@pytest.mark.parametrize("unit", [0.0, -1.0, np.inf, np.nan])
def test_a_unit_must_be_a_finite_positive_amount(unit: float) -> None:
    with pytest.raises(DataError, match="unit must be a finite amount > 0"):
        network(unit=unit)


@pytest.mark.parametrize("shape", [(2, 2), (3, 4), (4, 4)])
def test_flows_of_another_shape_are_refused(shape: tuple[int, int]) -> None:
    with pytest.raises(DataError, match="flows must be 3 x 3 for 3 places"):
        network(np.zeros(shape))


@pytest.mark.parametrize("bad", [-1.0, np.inf, -np.inf, np.nan])
def test_an_impossible_flow_is_named_with_its_places(bad: float) -> None:
    flows = FLOWS.copy()
    flows[2, 0] = bad
    with pytest.raises(DataError, match=r"finite and >= 0; got .* for Lee -> Ebb \(1 of 4"):
        network(flows)


def test_a_self_flow_is_refused() -> None:
    with pytest.raises(DataError, match=r"itself is not a dyad.* Flow -> Flow"):
        network(FLOWS + np.diag([0.0, 3.0, 0.0]))


def test_an_undirected_network_refuses_the_lower_triangle() -> None:
    with pytest.raises(DataError, match=r"listed first; got 1\.5 for Flow -> Ebb"):
        network(directed=False)


@pytest.mark.parametrize("values", [np.zeros(2), np.zeros((3, 1)), np.array(["a", "b"])])
def test_a_node_column_of_another_length_is_refused(values: Any) -> None:
    with pytest.raises(DataError, match="node column 'size' must hold 3 values; got shape"):
        network(nodes={"size": values})


@pytest.mark.parametrize("values", [np.zeros(3), np.zeros((3, 2))])
def test_a_dyad_column_of_another_shape_is_refused(values: Any) -> None:
    with pytest.raises(DataError, match="dyad column 'road' must be 3 x 3"):
        network(dyads={"road": values})


def test_infinite_columns_are_refused() -> None:
    with pytest.raises(DataError, match="node column 'size' must hold finite"):
        network(nodes={"size": np.array([1.0, np.inf, 2.0])})
    with pytest.raises(DataError, match="dyad column 'road' must hold finite"):
        network(dyads={"road": np.full((3, 3), -np.inf)})


def test_numbers_name_the_text_that_is_no_number() -> None:
    found = network(nodes={"size": np.array(["1", "", "many"]), "count": np.array([1, 2, 3])})
    with pytest.raises(DataError, match="'size' must hold finite numbers; got 'many' for Lee"):
        found.numbers("size")
    assert found.numbers("count").tolist() == [1.0, 2.0, 3.0]


def test_unknown_columns_come_with_the_nearest() -> None:
    found = network(nodes={"population": np.ones(3)}, dyads={"distance": np.ones((3, 3))})
    with pytest.raises(DataError, match="no node column 'populaton'; did you mean 'population'"):
        found.column("populaton")
    with pytest.raises(DataError, match="no dyad column 'distances'; did you mean 'distance'"):
        found.matrix("distances")


def test_the_given_flows_are_neither_changed_nor_followed() -> None:
    given = csr_array(FLOWS)
    given.data[0] = 0.0  # a stored zero, which is no link
    found = network(given)
    assert (given.nnz, found.n_links) == (3, 2)
    given.data[:] = 99.0
    assert found.total == 8.5


def test_repeated_cells_add_up_and_whole_numbers_become_floats() -> None:
    given = csr_array((np.array([1, 2]), np.array([1, 1]), np.array([0, 2, 2, 2])), shape=(3, 3))
    found = network(given)
    assert (found.n_links, found.total, found.flows.data.dtype) == (1, 3.0, np.float64)


def arrays_of(found: FlowNetwork) -> list[Any]:
    flows = found.flows
    return [
        flows.data,
        flows.indices,
        flows.indptr,
        found.column("size"),
        found.column("kind"),
        found.matrix("road"),
    ]


@pytest.mark.parametrize("trip", [lambda x: x, copy.deepcopy, lambda x: pickle.loads(pickle.dumps(x))])
def test_nothing_handed_out_can_be_written_to(trip: Any) -> None:
    found = trip(
        network(nodes={"size": np.ones(3), "kind": np.array(list("abc"))}, dyads={"road": np.ones((3, 3))})
    )
    for values in arrays_of(found):
        with pytest.raises(ValueError, match="read-only"):
            values[...] = values[...]
    with pytest.raises(TypeError):
        found.node_columns["size"] = np.zeros(3)
    with pytest.raises(TypeError):
        del found.dyad_columns["road"]


def test_an_unpickled_network_is_the_same_and_carries_no_caches() -> None:
    found = network(
        nodes={"size": np.array([1.0, np.nan, 3.0]), "kind": np.array(["a", "NA", ""])},
        dyads={"road": np.arange(9.0).reshape(3, 3)},
        period="2031",
    )
    before = pickle.dumps(found)
    digest = found.digest  # cached from here on
    assert len(pickle.dumps(found)) == len(before)
    again = pickle.loads(before)
    assert again.digest == digest
    assert (again.labels, again.period, again.provenance) == (found.labels, found.period, found.provenance)
    for old, new in zip(arrays_of(found), arrays_of(again), strict=True):
        np.testing.assert_array_equal(old, new)


def test_the_digest_follows_everything_a_fit_can_depend_on() -> None:
    nodes, dyads = {"size": np.ones(3)}, {"road": np.ones((3, 3))}
    other = FLOWS.copy()
    other[0, 1] = 2.5
    variants = [
        network(nodes=nodes, dyads=dyads),
        network(other, nodes=nodes, dyads=dyads),
        network(nodes=nodes, dyads=dyads, labels=("Ebb", "Lee", "Flow")),
        network(nodes=nodes, dyads=dyads, unit=2.0),
        network(nodes=nodes, dyads=dyads, period="2031"),
        network(nodes={"size": np.array([1.0, 1.0, 2.0])}, dyads=dyads),
        network(nodes={"width": np.ones(3)}, dyads=dyads),
        network(nodes=nodes, dyads={"road": np.eye(3)}),
        network(np.triu(FLOWS), nodes=nodes, dyads=dyads),
        network(np.triu(FLOWS), nodes=nodes, dyads=dyads, directed=False),
    ]
    assert len({variant.digest for variant in variants}) == len(variants)
    assert network(nodes=nodes, dyads=dyads).digest == variants[0].digest


def test_labels_of_numpy_are_texts_like_any_other() -> None:
    found = network(labels=tuple(np.array(LABELS)))
    assert all(type(label) is str for label in found.labels)
    assert found.digest == network().digest
