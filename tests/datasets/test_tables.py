"""From tables to a network: what is understood; wrong rows and tables are in test_wrong_tables.py."""

from __future__ import annotations

import math
import re
from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from steelyard.datasets import Columns, CovariateError, DataError, DyadCovariate, Dyads, FlowNetwork
from steelyard.datasets.tables import network_from_frames


def flows(*rows: tuple[Any, ...], columns: str = "origin destination flow") -> pd.DataFrame:
    rows = rows or (("A", "B", 5), ("B", "C", 2), ("C", "A", 0), ("B", "A", 1))
    return pd.DataFrame(rows, columns=columns.split(), dtype=object)


def nodes(*labels: Any, **columns: list[Any]) -> pd.DataFrame:
    return pd.DataFrame({"node": list(labels or ("A", "B", "C")), **columns}, dtype=object)


def dyads(**cells: Any) -> pd.DataFrame:
    """Rows from keywords such as AB=3.5."""
    return pd.DataFrame(
        [(k[0], k[1], v) for k, v in cells.items()], columns=["origin", "destination", "road"]
    )


def cells(network: FlowNetwork) -> dict[tuple[str, str], float]:
    rows, columns = network.flows.nonzero()
    names = network.labels
    return {(names[i], names[j]): float(network.flows[i, j]) for i, j in zip(rows, columns, strict=True)}


def problems(*tables: Any, **options: Any) -> tuple[str, ...]:
    with pytest.raises(DataError) as caught:
        network_from_frames(*tables, **options)
    assert str(caught.value) == "\n".join(caught.value.problems)
    return caught.value.problems


def only(found: tuple[str, ...]) -> str:
    assert len(found) == 1, found
    return found[0]


# --- what is understood


def test_flows_alone_name_the_places_sorted_and_zeros_are_no_links() -> None:
    network = network_from_frames(flows(("C", "B", 1), ("B", "A", 2.5), ("A", "C", 0)))
    assert network.labels == ("A", "B", "C")
    assert cells(network) == {("C", "B"): 1.0, ("B", "A"): 2.5}
    assert (network.directed, network.unit, network.period) == (True, 1.0, None)


def test_a_nodes_table_gives_the_order_and_places_without_any_flow() -> None:
    network = network_from_frames(flows(), nodes("Z", "C", "B", "A", size=[1, 2, 3, 4]))
    assert network.labels == ("Z", "C", "B", "A")
    assert network.numbers("size").tolist() == [1, 2, 3, 4]
    assert network.n_dyads == 12
    assert cells(network) == {("A", "B"): 5.0, ("B", "C"): 2.0, ("B", "A"): 1.0}


def test_from_frames_of_the_network_is_the_same() -> None:
    tables = flows(), nodes(size=[1, 2, 3]), dyads(AB=1.0)
    one, two = FlowNetwork.from_frames(*tables, unit=2.0), network_from_frames(*tables, unit=2.0)
    assert one.digest == two.digest


def test_undirected_sums_both_directions_whichever_comes_first() -> None:
    table = flows(("B", "A", 5), ("A", "B", 2), ("C", "A", 7), ("B", "C", 1))
    network = network_from_frames(table, directed=False)
    assert cells(network) == {("A", "B"): 7.0, ("A", "C"): 7.0, ("B", "C"): 1.0}
    assert "the two directions of each pair summed" in network.provenance.steps


@settings(deadline=None, max_examples=25)
@given(st.dictionaries(st.tuples(st.integers(0, 5), st.integers(0, 5)), st.integers(0, 10**12), min_size=1))
def test_any_listing_of_flows_is_kept_and_summed_exactly(amounts: dict[tuple[int, int], int]) -> None:
    listed = {(i, j): w for (i, j), w in amounts.items() if i != j}
    table = pd.DataFrame(
        [(i, j, w) for (i, j), w in listed.items()], columns=["origin", "destination", "flow"]
    )
    places = nodes(*range(6))
    found = cells(network_from_frames(table, places))
    assert found == {(str(i), str(j)): w for (i, j), w in listed.items() if w}
    summed: dict[tuple[str, str], int] = {}
    for (i, j), w in listed.items():
        key = (str(min(i, j)), str(max(i, j)))
        summed[key] = summed.get(key, 0) + w
    assert cells(network_from_frames(table, places, directed=False)) == {k: w for k, w in summed.items() if w}


def test_whole_number_labels_and_texts_of_them_are_the_same_places() -> None:
    table = pd.DataFrame({"origin": [10, 20], "destination": [20, 30], "flow": [1, 2]})
    network = network_from_frames(table, nodes("30", "20", "10"))
    assert cells(network) == {("10", "20"): 1.0, ("20", "30"): 2.0}


@pytest.mark.parametrize(
    "label", ["NA", "None", "nan", "null", "1.0", "007", "N/A", "São Tomé", "東京", "a, b", "-"]
)
def test_labels_are_texts_and_stay_as_they_are(label: str) -> None:
    table = flows((label, "B", 1), ("B", "C", 2))
    for network in (network_from_frames(table), network_from_frames(table, nodes("C", label, "B"))):
        assert cells(network) == {(label, "B"): 1.0, ("B", "C"): 2.0}


def test_spaces_around_a_label_do_not_make_another_place() -> None:
    table = flows((" A", "B ", 1), ("A", "C", 2), ("B\u00a0", "C\t", 3))
    expected = {("A", "B"): 1.0, ("A", "C"): 2.0, ("B", "C"): 3.0}
    assert cells(network_from_frames(table)) == expected
    assert cells(network_from_frames(table, nodes("A ", "  B", "C"), dyads(AB=1.0))) == expected
    assert cells(network_from_frames(flows(("New  Ayr", "B", 1), ("B", "New Ayr", 2)))).keys() == {
        ("New  Ayr", "B"),
        ("B", "New Ayr"),
    }  # only the spaces around it


def test_two_nodes_that_differ_by_spaces_only_are_one_listed_twice() -> None:
    found = only(problems(flows(), nodes("A", "B", "C", "A ")))
    assert found == "nodes, row 5, column 'node': each place must be listed once; got 'A '"


def test_two_encodings_of_one_accent_are_one_place() -> None:
    table = flows(("Me\u0301nec", "B", 1), ("B", "C", 2))
    assert cells(network_from_frames(table, nodes("M\u00e9nec", "B", "C")))[("M\u00e9nec", "B")] == 1.0


def test_columns_may_have_other_names() -> None:
    table = flows(("A", "B", 1), ("B", "C", 2), columns="from to tonnes")
    places = pd.DataFrame({"port": ["C", "B", "A"]})
    network = network_from_frames(table, places, columns=Columns("from", "to", "tonnes", "port"))
    assert cells(network) == {("A", "B"): 1.0, ("B", "C"): 2.0}


def test_node_columns_are_numbers_texts_or_gaps() -> None:
    network = network_from_frames(
        flows(),
        nodes(
            size=["1", " 2.5 ", ""],
            gap=[1.0, None, math.nan],
            word=["NA", " b ", None],
            mixed=["1", "NA", "3"],
            blank=["", "", ""],
            spelled=["1", "nan", "None"],
            flag=[True, False, True],
        ),
    )
    np.testing.assert_array_equal(network.numbers("size"), [1.0, 2.5, math.nan])
    np.testing.assert_array_equal(network.numbers("gap"), [1.0, math.nan, math.nan])
    np.testing.assert_array_equal(network.numbers("spelled"), [1.0, math.nan, math.nan])
    assert network.numbers("flag").tolist() == [1.0, 0.0, 1.0]
    assert network.column("word").tolist() == ["NA", "b", ""]
    with pytest.raises(DataError, match="'mixed' must hold finite numbers; got 'NA' for B"):
        network.numbers("mixed")
    with pytest.raises(DataError, match="'blank' must hold finite numbers; got '' for A"):
        network.numbers("blank")


@pytest.mark.parametrize("text", ["inf", "-Infinity", "1e999", "1,5", "1 000", "12O"])
def test_a_cell_that_is_no_finite_number_is_named_when_numbers_are_asked_for(text: str) -> None:
    network = network_from_frames(flows(), nodes(size=["1", text, "3"]))
    with pytest.raises(DataError, match=f"got '{re.escape(text)}' for B"):
        network.numbers("size")


def test_pandas_types_are_understood() -> None:
    table = pd.DataFrame(
        {
            "origin": pd.Categorical(["A", "B"]),
            "destination": pd.array(["B", "C"], dtype="string"),
            "flow": pd.array([3, 4], dtype="Int64"),
        }
    )
    places = pd.DataFrame(
        {
            "node": ["A", "B", "C"],
            "size": pd.array([1, None, 3], dtype="Int64"),
            "kind": pd.Categorical(["x", "y", None]),
            "opened": pd.to_datetime(["2031-01-01", "2031-01-02", "2031-01-03"]),
        }
    )
    network = network_from_frames(table, places)
    assert cells(network) == {("A", "B"): 3.0, ("B", "C"): 4.0}
    np.testing.assert_array_equal(network.numbers("size"), [1.0, math.nan, 3.0])
    assert network.column("kind").tolist() == ["x", "y", ""]
    with pytest.raises(DataError, match="'opened' must hold finite numbers"):
        network.numbers("opened")  # nanoseconds since 1970 would be numbers, and nonsense


def test_the_unit_is_kept_and_small_links_count_one() -> None:
    table = flows(("A", "B", 1), ("B", "C", 149), ("C", "A", 151), ("A", "C", 0))
    network = network_from_frames(table, unit=100)
    assert network.total == 301.0
    assert "amounts divided by the unit 100" in network.provenance.steps
    view = Dyads(network)  # AB AC BA BC CA CB
    assert view.weights.tolist() == [0.01, 0.0, 0.0, 1.49, 1.51, 0.0]
    assert view.counts.tolist() == [1.0, 0.0, 0.0, 1.0, 2.0, 0.0]


def test_the_tables_given_are_not_changed() -> None:
    tables = flows(), nodes(size=["1", "2 ", "3"]), dyads(AB=1.0)
    before = [table.copy(deep=True) for table in tables]
    network_from_frames(*tables, directed=False)
    for old, new in zip(before, tables, strict=True):
        pd.testing.assert_frame_equal(old, new)


# --- dyads


def test_directed_dyads_keep_both_directions_apart_and_gaps_open() -> None:
    matrix = network_from_frames(flows(), None, dyads(AB=1.0, BA=2.0, CA=3.0)).matrix("road")
    expected = np.full((3, 3), np.nan)
    expected[0, 1], expected[1, 0], expected[2, 0] = 1.0, 2.0, 3.0
    np.testing.assert_array_equal(matrix, expected)


def test_undirected_dyads_take_either_direction_and_refuse_unequal_ones() -> None:
    table = dyads(AB=1.0, CA=3.0, CB=4.0, BC=4.0)
    network = network_from_frames(flows(), None, table, directed=False)
    view = Dyads(network, {"road": DyadCovariate("road")})
    assert view.column("road").tolist() == [1.0, 3.0, 4.0]
    unequal = dyads(AB=1.0, BA=1.5, AC=3.0, BC=4.0, CB=5.0)
    network = network_from_frames(flows(), None, unequal, directed=False)
    assert set(network_from_frames(flows(), None, unequal).dyad_columns) == {"road"}
    with pytest.raises(DataError) as caught:
        network.matrix("road")
    assert str(caught.value) == (
        "dyads, column 'road': an undirected study needs one value a pair; got 1 for A -> B and 1.5 back "
        "(2 pairs differ); make them equal, or study directed flows"
    )
    with pytest.raises(CovariateError, match="covariate 'road': dyads, column 'road': an undirected study"):
        Dyads(network, {"road": DyadCovariate("road")})


def test_repeated_and_nameless_dyads_are_refused() -> None:
    table = pd.concat([dyads(AB=1.0, BA=2.0), dyads(AB=1.0)], ignore_index=True)
    assert "dyads, row 4, column 'origin': each ordered pair" in only(problems(flows(), None, table))
    table.loc[2, "origin"] = ""
    assert "dyads, row 4, column 'origin': a place must have" in only(problems(flows(), None, table))


def test_a_dyad_column_of_texts_is_refused_when_asked_for_with_its_row() -> None:
    table = dyads(AB="1", BA="12O", CA="").assign(note=["", "", ""], remark=["x", "y", "z"], road_2=[1, 2, 3])
    network = network_from_frames(flows(), None, table)
    assert set(network.dyad_columns) == {"road_2"}
    with pytest.raises(
        DataError, match=r"dyads, row 3, column 'road': a dyad column must hold finite.*got '12O'"
    ):
        network.matrix("road")
    with pytest.raises(DataError, match="dyads, column 'note' holds no number"):
        network.matrix("note")
    with pytest.raises(CovariateError, match=r"covariate 'far': dyads, row 2, column 'remark'.*3 of 3 rows"):
        Dyads(network, {"far": DyadCovariate("remark")})


def test_one_table_may_serve_as_flows_and_dyads_and_the_flow_is_no_covariate() -> None:
    table = flows(("A", "B", 5), ("B", "C", 2)).assign(road=[10.0, 20.0])
    assert set(network_from_frames(table, None, table).dyad_columns) == {"road"}
