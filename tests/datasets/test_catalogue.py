"""The data sets that ship: what they hold is what the notes beside the open tables state."""

from __future__ import annotations

import numpy as np
import pytest

from steelyard.datasets import (
    DataError,
    DistanceCovariate,
    DyadCovariate,
    Dyads,
    MatchCovariate,
    Transform,
    dataset_registry,
)

NAMES = ("air-routes-2008", "islands", "state-air-2008")


def test_three_data_sets_ship_and_load() -> None:
    assert set(NAMES) <= set(dataset_registry().names)
    for name in NAMES:
        data = dataset_registry().get(name)
        assert data.name == name
        assert data.load().n_links > 0


# Numbers: the README beside the open tables.
@pytest.mark.parametrize(
    ("name", "n_nodes", "n_links", "total", "density"),
    [("air-routes-2008", 305, 5_366, 7_009_728, 0.0579), ("state-air-2008", 49, None, 6_022_039, 0.5514)],
)
def test_open_data_are_as_stated(
    name: str, n_nodes: int, n_links: int | None, total: int, density: float
) -> None:
    network = dataset_registry().get(name).load()
    assert (network.n_nodes, network.total) == (n_nodes, total)
    assert round(network.n_links / network.n_dyads, 4) == density
    assert n_links in (None, network.n_links)
    both_ways = dataset_registry().get(name).load(directed=False)
    assert both_ways.total == total
    assert both_ways.n_dyads == network.n_dyads // 2


def test_air_routes_are_reciprocated_and_have_silent_ends_as_stated() -> None:
    network = dataset_registry().get("air-routes-2008").load()
    links = network.flows.toarray() > 0
    assert round(100 * (links & links.T).sum() / links.sum(), 2) == 94.37
    labels = np.array(network.labels)
    assert set(labels[~links.any(axis=1)]) == {"CYS", "OGD"}
    assert set(labels[~links.any(axis=0)]) == {"PUB"}


def test_the_label_na_is_a_state_of_four_airports() -> None:
    network = dataset_registry().get("air-routes-2008").load()
    states = network.column("state")
    assert {label for label, state in zip(network.labels, states, strict=True) if state == "NA"} == {
        "CLD",
        "HHH",
        "MQT",
        "SCE",
    }
    same = Dyads(network, {"same": MatchCovariate("state")})
    rows = {label: i for i, label in enumerate(network.labels)}
    between = (same.origin == rows["CLD"]) & (same.destination == rows["SCE"])
    assert same.column("same")[between].tolist() == [1.0]


@pytest.mark.parametrize("directed", [True, False])
def test_state_distances_are_the_great_circles_between_the_coordinates(directed: bool) -> None:
    network = dataset_registry().get("state-air-2008").load(directed=directed)
    dyads = Dyads(
        network, {"listed": DyadCovariate("distance"), "made": DistanceCovariate("latitude", "longitude")}
    )
    np.testing.assert_allclose(dyads.column("listed"), dyads.column("made"), rtol=1e-12)
    assert np.isfinite(network.numbers("population")).all()


def test_populations_by_direction_are_columns_of_directed_studies_only() -> None:
    data = dataset_registry().get("state-air-2008")
    network = data.load()
    matrix, size = network.matrix("origin_population"), network.numbers("population")
    off = ~np.eye(49, dtype=bool)
    np.testing.assert_array_equal(matrix[off], np.broadcast_to(size[:, None], (49, 49))[off])
    both_ways = data.load(directed=False)
    assert set(both_ways.dyad_columns) == {"distance"}
    with pytest.raises(DataError, match="'origin_population': an undirected study needs one value a pair"):
        both_ways.matrix("origin_population")


def test_islands_have_four_periods_and_the_last_is_taken() -> None:
    data = dataset_registry().get("islands")
    assert data.periods == ("2029", "2030", "2031", "2032")
    by_period = {period: data.load(period=period) for period in data.periods}
    assert len({network.digest for network in by_period.values()}) == 4
    assert data.load().digest == by_period["2032"].digest
    for period, network in by_period.items():
        assert (network.n_nodes, network.period) == (60, period)
        assert f"period {period} selected" in network.provenance.steps
        assert "NA" in network.labels
        assert (network.flows[[network.labels.index("NA")], :]).sum() > 0
        assert (
            len(Dyads(network, {"sea": DyadCovariate("sea_distance", Transform.LOG)}).column("sea")) == 3540
        )


def test_a_period_that_is_not_there_is_refused() -> None:
    registry = dataset_registry()
    with pytest.raises(DataError, match="'islands' has no period '1999'; it holds 2029, 2030, 2031, 2032"):
        registry.get("islands").load(period="1999")
    with pytest.raises(DataError, match="has no period '2008'; it holds none, so leave period out"):
        registry.get("state-air-2008").load(period="2008")


@pytest.mark.parametrize("name", NAMES)
def test_provenance_and_descriptions_are_complete(name: str) -> None:
    data = dataset_registry().get(name)
    source = data.load(unit=10.0).provenance
    assert source.source
    assert "public domain" in source.licence
    assert source.amount in ("flights", "tonnes")
    assert "amounts divided by the unit 10" in source.steps
    network = data.load()
    described = dict(data.described)
    nodes = {name for name, text in described.items() if text.startswith("node: ")}
    dyads = {name for name, text in described.items() if text.startswith("dyad: ")}
    assert nodes | dyads == set(described)
    assert nodes <= set(network.node_columns)
    assert dyads == set(network.dyad_columns)
    # A port's name is only a longer label.
    assert set(network.node_columns) - nodes <= {"name"}
