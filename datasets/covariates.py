"""Covariates: from what a study says ("log of throughput at the origin") to a number for each dyad."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum
from typing import TypeAlias

import numpy as np

from steelyard.datasets.arrays import Floats, Integers
from steelyard.datasets.errors import CovariateError, DataError
from steelyard.datasets.flows import FlowNetwork
from steelyard.datasets.geography import great_circle_km

__all__ = [
    "Covariate",
    "CovariateColumn",
    "DistanceCovariate",
    "DyadCovariate",
    "End",
    "MatchCovariate",
    "NodeCovariate",
    "Transform",
    "covariate_column",
    "covariate_columns",
]


class Transform(Enum):
    """What is done to a column before it enters a model."""

    NONE = "none"
    LOG = "log"
    LOG1P = "log1p"
    SQUARE = "square"
    STANDARDISE = "standardise"


class End(Enum):
    """Which end of a dyad a node column is read at.

    BOTH adds the transformed values of the two ends. DIFFERENCE is origin less destination, and its absolute
    value in an undirected network, where no end comes first.
    """

    ORIGIN = "origin"
    DESTINATION = "destination"
    BOTH = "both"
    DIFFERENCE = "difference"


@dataclass(frozen=True)
class NodeCovariate:
    """A node column at one end or both, transformed before the ends are combined."""

    column: str
    end: End
    transform: Transform = Transform.NONE


@dataclass(frozen=True)
class DyadCovariate:
    """A dyad column."""

    column: str
    transform: Transform = Transform.NONE


@dataclass(frozen=True)
class DistanceCovariate:
    """Great-circle distance in kilometres between two node columns in degrees."""

    latitude: str
    longitude: str
    transform: Transform = Transform.NONE


@dataclass(frozen=True)
class MatchCovariate:
    """1 where both ends have the same text or number in a node column, else 0."""

    column: str


Covariate: TypeAlias = NodeCovariate | DyadCovariate | DistanceCovariate | MatchCovariate


@dataclass(frozen=True, eq=False)
class CovariateColumn:
    """A covariate worked out for one network: either two node vectors or one matrix, never both.

    Attributes
    ----------
    origin, destination : (N,) contributions of the two ends, or None
    matrix : (N, N) values, or None
    absolute : whether the sum of the two ends enters by its absolute value
    """

    origin: Floats | None = None
    destination: Floats | None = None
    matrix: Floats | None = None
    absolute: bool = False

    def values(self, origin: Integers, destination: Integers) -> Floats:
        """(n,) values on the dyads whose ends are given as node positions."""
        if self.matrix is not None:
            return np.asarray(self.matrix[origin, destination])
        total = np.zeros(len(origin))
        if self.origin is not None:
            total += self.origin[origin]
        if self.destination is not None:
            total += self.destination[destination]
        return np.abs(total) if self.absolute else total


def covariate_column(name: str, covariate: Covariate, network: FlowNetwork) -> CovariateColumn:
    """Work out one covariate of a network.

    Raises
    ------
    CovariateError : a needed column is missing, has gaps, or holds values that the transform cannot take; or
        the covariate needs an origin and the network is undirected
    """
    if isinstance(covariate, NodeCovariate):
        return _node_column(name, covariate, network)
    if isinstance(covariate, DyadCovariate):
        return _matrix_column(name, network.matrix(covariate.column), covariate.transform, network)
    if isinstance(covariate, DistanceCovariate):
        return _matrix_column(name, _distances(name, covariate, network), covariate.transform, network)
    codes = np.unique(np.asarray(network.column(covariate.column)), return_inverse=True)[1]
    return CovariateColumn(matrix=(codes[:, None] == codes[None, :]).astype(np.float64))


def _node_column(name: str, covariate: NodeCovariate, network: FlowNetwork) -> CovariateColumn:
    if not network.directed and covariate.end in (End.ORIGIN, End.DESTINATION):
        raise CovariateError(
            f"covariate '{name}': an undirected network has no {covariate.end.value}; "
            'use end = "both" or "difference"'
        )
    values = network.numbers(covariate.column)
    _refuse_where(np.isnan(values), name, "is missing", network.labels)
    values = _transformed(name, values, covariate.transform, network.labels)
    if covariate.end is End.ORIGIN:
        return CovariateColumn(origin=values)
    if covariate.end is End.DESTINATION:
        return CovariateColumn(destination=values)
    if covariate.end is End.BOTH:
        return CovariateColumn(origin=values, destination=values)
    return CovariateColumn(origin=values, destination=-values, absolute=not network.directed)


def _matrix_column(name: str, matrix: Floats, transform: Transform, network: FlowNetwork) -> CovariateColumn:
    """Transform the off-diagonal cells of a matrix; the diagonal is no dyad and stays out of every check."""
    n = network.n_nodes
    rows, columns = np.nonzero(
        ~np.eye(n, dtype=bool) if network.directed else np.triu(np.ones((n, n), bool), 1)
    )
    values = matrix[rows, columns]
    labels = _PairLabels(network.labels, rows, columns)
    _refuse_where(np.isnan(values), name, "is missing", labels)
    filled = np.zeros((n, n))
    filled[rows, columns] = _transformed(name, values, transform, labels)
    return CovariateColumn(matrix=filled)


def _distances(name: str, covariate: DistanceCovariate, network: FlowNetwork) -> Floats:
    latitude, longitude = network.numbers(covariate.latitude), network.numbers(covariate.longitude)
    _refuse_where(np.isnan(latitude + longitude), name, "has no coordinates", network.labels)
    outside = (np.abs(latitude) > 90) | (np.abs(longitude) > 360)
    rule = "has coordinates beyond 90 degrees of latitude or 360 of longitude"
    _refuse_where(outside, name, rule, network.labels)
    return great_circle_km(latitude[:, None], longitude[:, None], latitude[None, :], longitude[None, :])


def _transformed(name: str, values: Floats, transform: Transform, labels: _Labels) -> Floats:
    """Apply a transform.

    Raises
    ------
    CovariateError : a value lies outside the transform's domain, or does not vary and cannot be standardised
    """
    if transform is Transform.LOG:
        _refuse_where(values <= 0, name, "is <= 0 and has no log", labels, values)
        return np.log(values)
    if transform is Transform.LOG1P:
        _refuse_where(values <= -1, name, "is <= -1 and has no log1p", labels, values)
        return np.log1p(values)
    if transform is Transform.SQUARE:
        return values**2
    if transform is Transform.STANDARDISE:
        spread = float(values.std())
        if spread == 0:
            raise CovariateError(
                f"covariate '{name}' does not vary, so it cannot be standardised; leave it out"
            )
        return np.asarray((values - values.mean()) / spread)
    return values


@dataclass(frozen=True, eq=False)
class _PairLabels:
    """Names of dyads, made only when a message needs one."""

    labels: tuple[str, ...]
    rows: Integers
    columns: Integers

    def __getitem__(self, position: int) -> str:
        return f"{self.labels[self.rows[position]]} -> {self.labels[self.columns[position]]}"


_Labels: TypeAlias = tuple[str, ...] | _PairLabels


def _refuse_where(
    bad: np.typing.NDArray[np.bool_], name: str, what: str, labels: _Labels, values: Floats | None = None
) -> None:
    """Raise a sentence that names the first offender and counts them all."""
    if not bad.any():
        return
    first = int(np.flatnonzero(bad)[0])
    got = "" if values is None else f" (got {values[first]:g})"
    raise CovariateError(
        f"covariate '{name}' {what} for {labels[first]}{got}, and for {int(bad.sum())} of {len(bad)} in all; "
        "mend the column, choose another transform, or leave the covariate out"
    )


def covariate_columns(
    definitions: Mapping[str, Covariate], network: FlowNetwork
) -> dict[str, CovariateColumn]:
    """Work out several covariates; all problems are reported at once.

    Raises
    ------
    CovariateError : with one sentence for each covariate that cannot be worked out
    """
    columns: dict[str, CovariateColumn] = {}
    problems: list[str] = []
    for name, definition in definitions.items():
        try:
            columns[name] = covariate_column(name, definition, network)
        except DataError as error:
            problems.extend(p if name in p else f"covariate '{name}': {p}" for p in error.problems)
    if problems:
        raise CovariateError(*problems)
    return columns
