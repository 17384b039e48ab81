"""Covariates: from what a study says ("log of throughput at the origin") to a number for each dyad."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import Enum
from typing import TypeAlias

import numpy as np

from steelyard.datasets.arrays import Bools, Floats, Integers, read_only
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


LARGEST_TO_SQUARE = 1e154


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
    """1 where both ends have the same text or number in a node column, else 0; both must be known."""

    column: str


Covariate: TypeAlias = NodeCovariate | DyadCovariate | DistanceCovariate | MatchCovariate


@dataclass(frozen=True, eq=False)
class CovariateColumn:
    """A covariate worked out for one network: node vectors, one matrix or one vector of codes, never several.

    Attributes
    ----------
    origin, destination : (N,) contributions of the two ends, or None
    matrix : (N, N) values, or None
    absolute : whether the sum of the two ends enters by its absolute value
    codes : (N,) the value is 1 where both ends have one code, else 0; or None
    """

    origin: Floats | None = None
    destination: Floats | None = None
    matrix: Floats | None = None
    absolute: bool = False
    codes: Integers | None = None

    def __post_init__(self) -> None:
        for name in ("origin", "destination", "matrix", "codes"):
            values = getattr(self, name)
            if values is not None:
                object.__setattr__(self, name, read_only(values))

    def values(self, origin: Integers, destination: Integers) -> Floats:
        """(n,) values on the dyads whose ends are given as node positions."""
        if self.matrix is not None:
            return np.asarray(self.matrix[origin, destination])
        if self.codes is not None:
            return np.asarray(self.codes[origin] == self.codes[destination], dtype=np.float64)
        total = np.zeros(len(origin))
        if self.origin is not None:
            total += self.origin[origin]
        if self.destination is not None:
            total += self.destination[destination]
        if self.absolute:
            np.abs(total, out=total)
        return total


def covariate_column(name: str, covariate: Covariate, network: FlowNetwork) -> CovariateColumn:
    """Work out one covariate of a network.

    Raises
    ------
    CovariateError : a needed column is missing, has gaps, or holds values that the transform cannot take; or
        the covariate needs an origin and the network is undirected
    """
    try:
        return _worked_out(name, covariate, network)
    except CovariateError:
        raise
    except DataError as error:  # the network knows its columns, but not which covariate asked for one
        raise CovariateError(*(f"covariate '{name}': {problem}" for problem in error.problems)) from error


def _worked_out(name: str, covariate: Covariate, network: FlowNetwork) -> CovariateColumn:
    if isinstance(covariate, NodeCovariate):
        return _node_column(name, covariate, network)
    if isinstance(covariate, DistanceCovariate):
        subject = f"covariate '{name}' (columns '{covariate.latitude}', '{covariate.longitude}')"
        return _matrix_column(subject, _distances(subject, covariate, network), covariate.transform, network)
    subject = f"covariate '{name}' (column '{covariate.column}')"
    if isinstance(covariate, DyadCovariate):
        return _matrix_column(subject, network.matrix(covariate.column), covariate.transform, network)
    values = np.asarray(network.column(covariate.column))
    missing = np.isnan(values) if values.dtype.kind == "f" else np.char.strip(values.astype(np.str_)) == ""
    _refuse_where(missing, subject, "is missing", network.labels)
    return CovariateColumn(codes=np.unique(values, return_inverse=True)[1].astype(np.int64))


def _node_column(name: str, covariate: NodeCovariate, network: FlowNetwork) -> CovariateColumn:
    if not network.directed and covariate.end in (End.ORIGIN, End.DESTINATION):
        raise CovariateError(
            f"covariate '{name}': an undirected network has no {covariate.end.value}; "
            'use end = "both" or "difference"'
        )
    subject = f"covariate '{name}' (column '{covariate.column}')"
    values = network.numbers(covariate.column)
    _refuse_where(np.isnan(values), subject, "is missing", network.labels)
    values = _transformed(subject, values, covariate.transform, network.labels)
    if covariate.end is End.ORIGIN:
        return CovariateColumn(origin=values)
    if covariate.end is End.DESTINATION:
        return CovariateColumn(destination=values)
    if covariate.end is End.BOTH:
        return CovariateColumn(origin=values, destination=values)
    return CovariateColumn(origin=values, destination=-values, absolute=not network.directed)


def _matrix_column(
    subject: str, matrix: Floats, transform: Transform, network: FlowNetwork
) -> CovariateColumn:
    """Transform the off-diagonal cells of a matrix; the diagonal is no dyad and stays out of every check."""
    n = network.n_nodes
    inside = ~np.eye(n, dtype=bool) if network.directed else np.triu(np.ones((n, n), bool), 1)
    values = matrix[inside]
    labels = _PairLabels(network.labels, inside)
    missing = np.isnan(values)
    # A distance table often lists each pair once, which is enough for an undirected study only.
    back = network.directed and missing.any() and not np.isnan(matrix.T[inside][missing]).any()
    once = "; a directed study needs a value for each of the two directions" if back else ""
    _refuse_where(missing, subject, "is missing", labels, advice=once)
    filled = np.zeros((n, n))
    filled[inside] = _transformed(subject, values, transform, labels)
    return CovariateColumn(matrix=filled)


def _distances(subject: str, covariate: DistanceCovariate, network: FlowNetwork) -> Floats:
    latitude, longitude = network.numbers(covariate.latitude), network.numbers(covariate.longitude)
    _refuse_where(np.isnan(latitude + longitude), subject, "has no coordinates", network.labels)
    outside = (np.abs(latitude) > 90) | (np.abs(longitude) > 360)
    rule = "has coordinates beyond 90 degrees of latitude or 360 of longitude"
    _refuse_where(outside, subject, rule, network.labels)
    return great_circle_km(latitude[:, None], longitude[:, None], latitude[None, :], longitude[None, :])


def _transformed(subject: str, values: Floats, transform: Transform, labels: _Labels) -> Floats:
    """Apply a transform to finite values.

    Raises
    ------
    CovariateError : a value lies outside the transform's domain, or does not vary and cannot be standardised
    """
    if transform is Transform.LOG:
        _refuse_where(values <= 0, subject, "is <= 0 and has no log", labels, values)
        return np.log(values)
    if transform is Transform.LOG1P:
        _refuse_where(values <= -1, subject, "is <= -1 and has no log1p", labels, values)
        return np.log1p(values)
    if transform is Transform.SQUARE:
        _refuse_where(np.abs(values) > LARGEST_TO_SQUARE, subject, "is too large to square", labels, values)
        return values**2
    if transform is Transform.STANDARDISE:
        if np.ptp(values) == 0:  # the standard deviation of equal numbers can round to more than 0
            raise CovariateError(f"{subject} does not vary, so it cannot be standardised; leave it out")
        return np.asarray((values - values.mean()) / values.std())
    return values


@dataclass(frozen=True, eq=False)
class _PairLabels:
    """Names of dyads, made only when a message needs one."""

    labels: tuple[str, ...]
    inside: Bools

    def __getitem__(self, position: int) -> str:
        origin, destination = divmod(int(np.flatnonzero(self.inside)[position]), len(self.labels))
        return f"{self.labels[origin]} -> {self.labels[destination]}"


_Labels: TypeAlias = tuple[str, ...] | _PairLabels


def _refuse_where(
    bad: Bools, subject: str, what: str, labels: _Labels, values: Floats | None = None, advice: str = ""
) -> None:
    """Raise a sentence that names the first offender and counts them all."""
    if not bad.any():
        return
    first = int(np.flatnonzero(bad)[0])
    got = "" if values is None else f" (got {values[first]:g})"
    raise CovariateError(
        f"{subject} {what} for {labels[first]}{got}, and for {int(bad.sum())} of {len(bad)} in all{advice}; "
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
        except CovariateError as error:
            problems.extend(error.problems)
    if problems:
        raise CovariateError(*problems)
    return columns
