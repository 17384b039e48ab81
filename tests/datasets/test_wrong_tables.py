"""Every way in which a table can be wrong: refused in a sentence that says where."""

from __future__ import annotations

import math
from typing import Any

import pandas as pd
import pytest

from steelyard.datasets import Columns, DataError
from steelyard.datasets.tables import network_from_frames

YEARLY = Columns(period="year")


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


def problems(*tables: Any, **options: Any) -> tuple[str, ...]:
    with pytest.raises(DataError) as caught:
        network_from_frames(*tables, **options)
    assert str(caught.value) == "\n".join(caught.value.problems)
    return caught.value.problems


def only(found: tuple[str, ...]) -> str:
    assert len(found) == 1, found
    return found[0]


# --- wrong rows


@pytest.mark.parametrize(
    ("amount", "rule"),
    [
        ("many", "a flow must be a finite number"),
        ("", "a flow must be a finite number"),
        (None, "a flow must be a finite number"),
        (math.nan, "a flow must be a finite number"),
        ("inf", "a flow must be a finite number"),
        (math.inf, "a flow must be a finite number"),
        (-math.inf, "a flow must be a finite number"),
        ("1,000", "a flow must be a finite number"),
        ("0x10", "a flow must be a finite number"),
        (-1, "a flow must be >= 0"),
        ("-0.5", "a flow must be >= 0"),
    ],
)
def test_an_impossible_flow_is_refused_with_its_row(amount: Any, rule: str) -> None:
    found = only(problems(flows(("A", "B", 1), ("B", "C", amount), ("C", "A", 2))))
    assert found == f"flows, row 3, column 'flow': {rule}; got '{amount}'"


def test_a_self_flow_is_refused_but_a_listed_zero_is_not() -> None:
    found = only(problems(flows(("A", "B", 1), ("C", "C", 4))))
    assert found.startswith("flows, row 3, column 'origin': a flow from a place to itself is not a dyad")
    assert network_from_frames(flows(("A", "B", 1), ("B", "C", 1), ("C", "C", 0))).n_links == 2


def test_a_repeated_pair_is_refused_and_counted() -> None:
    table = flows(("A", "B", 1), ("B", "C", 2), ("A", "B", 1), (" A", "B", 0), ("B", "A", 1))
    found = only(problems(table))
    assert found.startswith("flows, row 4, column 'origin': each ordered pair must be listed once;")
    assert found.endswith("2 of 5 rows break this rule")


def test_a_place_that_the_nodes_do_not_list_is_refused() -> None:
    found = problems(
        flows(("A", "B", 1), ("Q", "B", 2), ("B", "R", 1)), nodes(), names=("f.csv", "n.csv", "d.csv")
    )
    assert found == (
        "f.csv, row 3, column 'origin': the place must be listed in n.csv; got 'Q'",
        "f.csv, row 4, column 'destination': the place must be listed in n.csv; got 'R'",
    )


def test_without_a_nodes_table_dyads_must_keep_to_the_places_of_the_flows() -> None:
    found = only(problems(flows(), None, dyads(AB=1.0, AX=2.0), names=("f.csv", "", "d.csv")))
    assert found == "d.csv, row 3, column 'destination': the place must be listed in f.csv; got 'X'"


@pytest.mark.parametrize("gap", ["", "  ", None, math.nan, pd.NA])
def test_a_row_without_a_place_is_refused_not_made_a_place(gap: Any) -> None:
    found = only(problems(flows(("A", "B", 1), ("B", "C", 2), (gap, "A", 3))))
    assert found.startswith("flows, row 4, column 'origin': a place must have a label")
    found = only(problems(flows(), nodes("A", "B", "C", gap, gap)))
    assert found.startswith("nodes, row 5, column 'node': a place must have a label")
    assert found.endswith("2 of 5 rows break this rule")


def test_several_problems_are_reported_at_once() -> None:
    table = flows(("A", "B", -1), ("A", "B", 2), ("C", "C", 3), ("C", "Q", "x"), ("", "A", 1))
    found = problems(table, nodes("A", "B", "C", "A"), dyads(AB=1.0, ZB=1.0))
    rules = (
        "listed once",
        "have a label",
        "listed in nodes",
        "finite number",
        ">= 0",
        "itself",
        "ordered pair",
    )
    for rule in rules:
        assert any(rule in sentence for sentence in found), rule
    assert any(sentence.startswith("dyads, row 3") for sentence in found)
    assert len(found) == len(set(found)) == 8


def test_row_numbers_survive_a_filter_and_ignore_an_index_of_texts() -> None:
    table = flows(("A", "B", 1), ("B", "C", 1), ("A", "C", -1))
    assert "row 4," in only(problems(table[table["destination"] == "C"]))
    assert "row 4," in only(problems(table.set_axis(["x", "y", "z"])))


# --- wrong tables


def test_missing_columns_are_all_named_with_the_nearest() -> None:
    found = problems(flows(("A", "B", 1), columns="orign destination weight"))
    assert found[0] == "flows has no column 'origin'; did you mean 'orign'? (or name it under columns)"
    assert found[1].startswith("flows has no column 'flow'; known are: destination, orign, weight")
    assert "nodes has no column 'node'" in only(problems(flows(), pd.DataFrame({"port": ["A"]})))
    bare = pd.DataFrame({"origin": ["A"], "road": [1.0]})
    assert "dyads has no column 'destination'" in only(problems(flows(), None, bare))


def test_a_repeated_column_name_is_refused() -> None:
    table = pd.DataFrame([["A", "B", 1, 2]], columns=["origin", "destination", "flow", "flow"])
    assert only(problems(table)) == "flows: column names must differ; repeated: flow"


def test_columns_named_by_numbers_can_be_asked_for_by_text() -> None:
    table = pd.DataFrame([["A", "B", 1], ["B", "C", 2]])
    assert network_from_frames(table, columns=Columns("0", "1", "2")).total == 3.0


@pytest.mark.parametrize(
    "make",
    [
        lambda: Columns(origin="place", destination="place"),
        lambda: Columns(flow="origin"),
        lambda: Columns(period="flow"),
        lambda: Columns(node="year", period="year"),
    ],
)
def test_one_column_cannot_play_two_parts(make: Any) -> None:
    with pytest.raises(DataError, match="must be two columns of a table; got"):
        make()


@pytest.mark.parametrize(("table", "n"), [(flows(("A", "B", 1)), 2), (flows(("A", "B", 1)).iloc[:0], 0)])
def test_too_few_places(table: pd.DataFrame, n: int) -> None:
    assert f"at least three places; got {n}" in only(problems(table))


@pytest.mark.parametrize("unit", [0, -1, math.inf, math.nan])
def test_a_bad_unit(unit: float) -> None:
    assert "unit must be a finite amount > 0" in only(problems(flows(), unit=unit))


# --- periods


def yearly(*years: Any) -> pd.DataFrame:
    rows = [(year, a, b, k + 1) for k, year in enumerate(years) for a, b in (("A", "B"), ("B", "C"))]
    return flows(*rows, columns="year origin destination flow")


@pytest.mark.parametrize("years", [(2030, 2031), ("2030", "2031"), (" 2030", "2031 ")])
def test_one_of_several_periods_is_chosen(years: tuple[Any, ...]) -> None:
    network = network_from_frames(yearly(*years), columns=YEARLY, period="2031")
    assert (network.total, network.period) == (4.0, "2031")
    assert "period 2031 selected" in network.provenance.steps


def test_a_period_must_be_chosen_when_there_are_several_and_must_exist() -> None:
    table = yearly(2030, 2031)
    assert "flows holds 2 periods (2030 ... 2031); choose one" in only(problems(table, columns=YEARLY))
    found = only(problems(table, columns=YEARLY, period="2032"))
    assert found == "flows has no period '2032'; it holds 2030, 2031"
    assert network_from_frames(yearly(2030), columns=YEARLY).total == 2.0


@pytest.mark.parametrize("gap", ["", None, math.nan])
def test_a_row_without_a_period_is_refused_not_dropped(gap: Any) -> None:
    found = only(problems(yearly(2031, gap), columns=YEARLY, period="2031"))
    assert found.startswith("flows, row 4, column 'year': every row must name its period")


def test_a_period_that_nothing_could_be_searched_for_is_refused_not_ignored() -> None:
    found = only(problems(yearly(2030), period="2030"))
    assert "no column holds periods; name it under columns" in found
    found = only(problems(yearly(2030), nodes(), columns=Columns(period="yaer"), period="2030"))
    assert found.startswith("no column 'yaer' for the period in flows, nodes; did you mean 'year'")


def test_other_tables_may_hold_for_every_period_or_have_their_own() -> None:
    table = yearly(2030, 2031)
    everlasting = network_from_frames(table, nodes(size=[1, 2, 3]), columns=YEARLY, period="2031")
    assert everlasting.numbers("size").tolist() == [1, 2, 3]
    grown = pd.concat(
        [nodes(size=[1, 2, 3]).assign(year=2030), nodes("C", "B", "A", size=[6, 5, 4]).assign(year=2031)],
        ignore_index=True,
    )
    network = network_from_frames(table, grown, columns=YEARLY, period="2031")
    assert (network.labels, network.numbers("size").tolist()) == (("C", "B", "A"), [6, 5, 4])
    assert set(network.node_columns) == {"size"}
    assert "nodes has no period '2031'" in only(
        problems(table, grown[grown["year"] == 2030], columns=YEARLY, period="2031")
    )
    wrong = grown.assign(node=["A", "B", "C", "C", "B", "B"])
    assert (
        "nodes, row 7, column 'node': each place" in problems(table, wrong, columns=YEARLY, period="2031")[0]
    )
