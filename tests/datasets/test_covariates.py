"""Covariates against literal loops, and every value that a transform cannot take, by name."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from scipy.sparse import csr_array

from steelyard.datasets import (
    Covariate,
    CovariateError,
    DistanceCovariate,
    DyadCovariate,
    Dyads,
    End,
    FlowNetwork,
    MatchCovariate,
    NodeCovariate,
    Provenance,
    Transform,
)
from steelyard.datasets.covariates import CovariateColumn, covariate_column

N = 5
LABELS = ("Ara", "Bel", "Cor", "Dun", "Esk")
SIZE = [2.0, 0.5, 7.0, 3.0, 1.25]
LATITUDE, LONGITUDE = [0.0, 10.0, -20.0, 45.0, 60.0], [0.0, 20.0, 170.0, -100.0, 5.0]
TONGUE = ["x", "y", "x", "NA", "y"]
RNG = np.random.default_rng(11)
ROAD = RNG.uniform(0.5, 9.0, (N, N))
np.fill_diagonal(ROAD, np.nan)  # the diagonal is no dyad and must stay out of every check


def network(*, directed: bool = True, nodes: dict[str, Any] | None = None, road: Any = None) -> FlowNetwork:
    columns = {
        "size": np.array(SIZE),
        "latitude": np.array(LATITUDE),
        "longitude": np.array(LONGITUDE),
        "tongue": np.array(TONGUE),
    }
    flows = csr_array(np.triu(np.ones((N, N)), 1))
    matrix = ROAD if road is None else road
    return FlowNetwork(
        LABELS, flows, directed, 1.0, columns | (nodes or {}), {"road": matrix}, Provenance("invented")
    )


def worked_out(covariate: Covariate, found: FlowNetwork) -> list[float]:
    return Dyads(found, {"it": covariate}).column("it").tolist()


def loop(directed: bool) -> list[tuple[int, int]]:
    return [(i, j) for i in range(N) for j in range(N) if (i != j if directed else i < j)]


def standardised(values: list[float]) -> Callable[[float], float]:
    mean = math.fsum(values) / len(values)
    spread = math.sqrt(math.fsum((v - mean) ** 2 for v in values) / len(values))
    return lambda v: (v - mean) / spread


def transformed(transform: Transform, values: list[float]) -> Callable[[float], float]:
    """A transform as a function of one number, given all the numbers it is applied to."""
    return {
        Transform.NONE: lambda v: v,
        Transform.LOG: math.log,
        Transform.LOG1P: math.log1p,
        Transform.SQUARE: lambda v: v * v,
        Transform.STANDARDISE: standardised(values),
    }[transform]


@pytest.mark.parametrize("transform", Transform)
@pytest.mark.parametrize("end", End)
def test_node_covariates_directed(end: End, transform: Transform) -> None:
    f = transformed(transform, SIZE)
    combine = {
        End.ORIGIN: lambda a, _: a,
        End.DESTINATION: lambda _, b: b,
        End.BOTH: lambda a, b: a + b,
        End.DIFFERENCE: lambda a, b: a - b,
    }[end]
    expected = [combine(f(SIZE[i]), f(SIZE[j])) for i, j in loop(True)]
    found = worked_out(NodeCovariate("size", end, transform), network())
    assert found == pytest.approx(expected, rel=1e-13, abs=1e-13)


@pytest.mark.parametrize("transform", Transform)
def test_node_covariates_undirected(transform: Transform) -> None:
    f = transformed(transform, SIZE)
    found = network(directed=False)
    both = [f(SIZE[i]) + f(SIZE[j]) for i, j in loop(False)]
    apart = [abs(f(SIZE[i]) - f(SIZE[j])) for i, j in loop(False)]
    assert worked_out(NodeCovariate("size", End.BOTH, transform), found) == pytest.approx(both, rel=1e-13)
    assert worked_out(NodeCovariate("size", End.DIFFERENCE, transform), found) == pytest.approx(
        apart, rel=1e-13
    )


@pytest.mark.parametrize("directed", [True, False])
@pytest.mark.parametrize("transform", Transform)
def test_dyad_covariates(transform: Transform, directed: bool) -> None:
    """Standardised over the dyads of the network: all cells but the diagonal, or the upper triangle."""
    values = [float(ROAD[i, j]) for i, j in loop(directed)]
    expected = [transformed(transform, values)(v) for v in values]
    found = worked_out(DyadCovariate("road", transform), network(directed=directed))
    assert found == pytest.approx(expected, rel=1e-12, abs=1e-12)


@pytest.mark.parametrize("directed", [True, False])
@pytest.mark.parametrize("transform", Transform)
def test_distance_covariates(transform: Transform, directed: bool) -> None:
    """The spherical law of cosines, good to 1e-9 at these distances, on a sphere of 6371.0088 km."""

    def angle(i: int, j: int) -> float:
        one, two = math.radians(LATITUDE[i]), math.radians(LATITUDE[j])
        turn = math.radians(LONGITUDE[i] - LONGITUDE[j])
        return math.acos(math.sin(one) * math.sin(two) + math.cos(one) * math.cos(two) * math.cos(turn))

    values = [6371.0088 * angle(i, j) for i, j in loop(directed)]
    expected = [transformed(transform, values)(v) for v in values]
    found = worked_out(DistanceCovariate("latitude", "longitude", transform), network(directed=directed))
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("directed", [True, False])
@pytest.mark.parametrize("column", ["tongue", "class"])
def test_match_covariates_of_texts_and_numbers(column: str, directed: bool) -> None:
    values: list[Any] = TONGUE if column == "tongue" else [1.0, 2.0, 2.0, 1.0, 3.5]
    found = network(directed=directed, nodes={"class": np.array([1.0, 2.0, 2.0, 1.0, 3.5])})
    expected = [float(values[i] == values[j]) for i, j in loop(directed)]
    assert 0 < sum(expected) < len(expected)
    assert worked_out(MatchCovariate(column), found) == expected


@pytest.mark.parametrize("values", [np.array(["x", "", "x", "", "y"]), np.array([1, np.nan, 1, np.nan, 2])])
def test_two_unknown_values_do_not_match_each_other(values: Any) -> None:
    with pytest.raises(CovariateError, match=r"'it' \(column 'tongue'\) is missing for Bel, and for 2 of 5"):
        worked_out(MatchCovariate("tongue"), network(nodes={"tongue": values}))


@pytest.mark.parametrize("end", [End.ORIGIN, End.DESTINATION])
def test_an_undirected_network_has_no_first_end(end: End) -> None:
    with pytest.raises(
        CovariateError, match=f"'it': an undirected network has no {end.value}; use end = \"both\""
    ):
        worked_out(NodeCovariate("size", end), network(directed=False))


@pytest.mark.parametrize(
    ("transform", "bad", "what"),
    [
        (Transform.NONE, math.nan, "is missing"),
        (Transform.LOG, 0.0, "is <= 0 and has no log"),
        (Transform.LOG, -2.0, "is <= 0 and has no log"),
        (Transform.LOG1P, -1.0, "is <= -1 and has no log1p"),
        (Transform.SQUARE, 1e200, "is too large to square"),
    ],
)
def test_values_that_a_transform_cannot_take_are_named(transform: Transform, bad: float, what: str) -> None:
    size = np.array([*SIZE[:3], bad, bad])
    with pytest.raises(
        CovariateError, match=rf"'it' \(column 'size'\) {what} for Dun.*, and for 2 of 5 in all"
    ):
        worked_out(NodeCovariate("size", End.ORIGIN, transform), network(nodes={"size": size}))
    road = ROAD.copy()
    road[3, 1] = bad
    with pytest.raises(
        CovariateError, match=rf"'it' \(column 'road'\) {what} for Dun -> Bel.*1 of 20 in all"
    ):
        worked_out(DyadCovariate("road", transform), network(road=road))
    # An undirected study reads the upper triangle and need not care.
    assert len(worked_out(DyadCovariate("road", transform), network(directed=False, road=road))) == 10


@pytest.mark.parametrize("value", [0.1, 1e9, 0.0])  # 0.1 five times has a standard deviation of 1e-17
def test_a_column_that_does_not_vary_cannot_be_standardised(value: float) -> None:
    with pytest.raises(CovariateError, match=r"'it' \(column 'size'\) does not vary"):
        worked_out(
            NodeCovariate("size", End.BOTH, Transform.STANDARDISE), network(nodes={"size": np.full(N, value)})
        )
    with pytest.raises(CovariateError, match=r"'it' \(column 'road'\) does not vary"):
        worked_out(DyadCovariate("road", Transform.STANDARDISE), network(road=np.full((N, N), value)))


def test_distances_listed_once_a_pair_are_explained_in_a_directed_study() -> None:
    once = np.where(np.triu(np.ones((N, N), bool), 1), ROAD, np.nan)
    with pytest.raises(
        CovariateError, match="missing for Bel -> Ara, and for 10 of 20 in all; a directed study"
    ):
        worked_out(DyadCovariate("road"), network(road=once))
    with pytest.raises(CovariateError, match="10 of 10 in all; mend"):
        worked_out(DyadCovariate("road"), network(directed=False, road=once.T))


@pytest.mark.parametrize(
    ("column", "values", "what"),
    [
        ("latitude", [0, 91, 0, 0, 0], "beyond 90 degrees"),
        ("longitude", [0, 361, 0, 0, 0], "beyond 90 degrees"),
        ("latitude", [0, math.nan, 0, 0, 0], "has no coordinates"),
        ("longitude", [0, math.nan, 0, 0, 0], "has no coordinates"),
    ],
)
def test_impossible_coordinates_are_named(column: str, values: list[float], what: str) -> None:
    with pytest.raises(CovariateError, match=rf"'it' \(columns 'latitude', 'longitude'\) .*{what}.* for Bel"):
        worked_out(
            DistanceCovariate("latitude", "longitude"), network(nodes={column: np.array(values, dtype=float)})
        )


@pytest.mark.parametrize(
    ("covariate", "what"),
    [
        (NodeCovariate("sise", End.BOTH), "no node column 'sise'; did you mean 'size'"),
        (NodeCovariate("tongue", End.BOTH), "'tongue' must hold finite numbers; got 'x' for Ara"),
        (DyadCovariate("rode"), "no dyad column 'rode'; did you mean 'road'"),
        (MatchCovariate("tounge"), "no node column 'tounge'; did you mean 'tongue'"),
        (DistanceCovariate("latitude", "lon"), "no node column 'lon'; did you mean 'longitude'"),
    ],
)
def test_missing_and_text_columns_are_covariate_errors(covariate: Covariate, what: str) -> None:
    with pytest.raises(CovariateError, match=f"^covariate 'it': .*{what}"):
        covariate_column("it", covariate, network())


def test_all_covariates_that_fail_are_reported_each_under_its_name() -> None:
    """Short names must not be taken for part of another sentence."""
    definitions = {
        "a": MatchCovariate("nothing"),
        "good": DyadCovariate("road"),
        "e": NodeCovariate("tongue", End.BOTH),
        "zero": NodeCovariate("none", End.BOTH, Transform.LOG),
    }
    with pytest.raises(CovariateError) as caught:
        Dyads(network(nodes={"none": np.zeros(N)}), definitions)
    assert len(caught.value.problems) == 3
    for name, problem in zip(("a", "e", "zero"), caught.value.problems, strict=True):
        assert problem.startswith(f"covariate '{name}'")


def test_a_worked_out_column_cannot_be_written_to() -> None:
    for covariate in (NodeCovariate("size", End.BOTH), DyadCovariate("road"), MatchCovariate("tongue")):
        found: CovariateColumn = covariate_column("it", covariate, network())
        arrays = [a for a in (found.origin, found.destination, found.matrix, found.codes) if a is not None]
        assert arrays
        assert not any(values.flags.writeable for values in arrays)
