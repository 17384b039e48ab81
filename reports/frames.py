"""From tidy tables to typed rows: the only place that knows their columns."""

import dataclasses
import math
import types
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TypeVar

import pandas as pd

from steelyard.reports.errors import ReportError

__all__ = [
    "CandidateRow",
    "CriterionRow",
    "EstimateRow",
    "OutcomeRow",
    "RunTables",
    "ScoreRow",
    "SpecificationRow",
    "read_tables",
]

Row = TypeVar(
    "Row", "CandidateRow", "CriterionRow", "EstimateRow", "OutcomeRow", "ScoreRow", "SpecificationRow"
)

NODE_PREFIX = "node:"


@dataclass(frozen=True, slots=True)
class CandidateRow:
    """A row of `candidates`: what was fitted, on what, and whether the fit is certified."""

    candidate: str
    family: str
    links: str
    weights: str
    information: str
    measure: str
    footing: str
    n_nodes: int | None
    n_dyads: int | None
    n_links: int | None
    n_parameters: float
    log_likelihood: float
    log_likelihood_links: float
    log_likelihood_weights: float
    converged: bool | None
    iterations: int | None
    residual: float
    message: str


@dataclass(frozen=True, slots=True)
class CriterionRow:
    """A row of `criteria`: one information criterion of one candidate on one footing."""

    footing: str
    candidate: str
    criterion: str
    value: float
    delta: float
    weight: float
    rank: int | None


@dataclass(frozen=True, slots=True)
class EstimateRow:
    """A row of `estimates`: one term under one kind of standard error."""

    candidate: str
    part: str
    term: str
    estimate: float
    se_kind: str
    se: float
    z: float
    p_value: float
    lower: float
    upper: float
    note: str = ""

    @property
    def is_node(self) -> bool:
        """Whether the term belongs to one node."""
        return self.term.startswith(NODE_PREFIX)


@dataclass(frozen=True, slots=True)
class ScoreRow:
    """A row of `scores`: one score of one candidate on one fold; infinite where a dyad was impossible."""

    footing: str
    candidate: str
    scheme: str
    repeat: int | None
    fold: int | None
    score: str
    better: str
    value: float
    n_dyads: int | None
    n_impossible: int | None


@dataclass(frozen=True, slots=True)
class OutcomeRow:
    """A row of `outcomes`: what became of one candidate in one fold, or in the fit to all dyads."""

    candidate: str
    scheme: str
    repeat: int | None
    fold: int | None
    outcome: str
    reason: str


@dataclass(frozen=True, slots=True)
class SpecificationRow:
    """A row of `tests`: one test of specification; without a statistic, its note says why."""

    candidate: str
    test: str
    against: str
    statistic: float
    p_value: float
    note: str


@dataclass(frozen=True)
class RunTables:
    """The six tables a report reads; a table that was not given has no rows."""

    candidates: tuple[CandidateRow, ...]
    criteria: tuple[CriterionRow, ...]
    estimates: tuple[EstimateRow, ...]
    scores: tuple[ScoreRow, ...]
    outcomes: tuple[OutcomeRow, ...]
    tests: tuple[SpecificationRow, ...]


def read_tables(tables: Mapping[str, pd.DataFrame]) -> RunTables:
    """Read the tidy tables a report needs.

    Parameters
    ----------
    tables : tidy tables by name; tables and columns that a report does not read are passed over

    Raises
    ------
    ReportError : a table lacks a column, or a column holds what it should not
    """
    return RunTables(
        candidates=_rows(tables, "candidates", CandidateRow),
        criteria=_rows(tables, "criteria", CriterionRow),
        estimates=_rows(tables, "estimates", EstimateRow),
        scores=_rows(tables, "scores", ScoreRow),
        outcomes=_rows(tables, "outcomes", OutcomeRow),
        tests=_rows(tables, "tests", SpecificationRow),
    )


def _rows(tables: Mapping[str, pd.DataFrame], name: str, row_type: type[Row]) -> tuple[Row, ...]:
    frame = tables.get(name)
    if frame is None:
        return ()
    fields = [
        field
        for field in dataclasses.fields(row_type)
        if field.name in frame.columns or field.default is dataclasses.MISSING
    ]
    lacking = [field.name for field in fields if field.name not in frame.columns]
    if lacking:
        raise ReportError(
            f"table {name!r}",
            f"columns {[str(column) for column in frame.columns]}",
            f"also {lacking}",
            "give the tidy table with all its columns",
        )
    columns = [_column(name, frame, field.name, _CONVERTERS[field.type]) for field in fields]
    return tuple(row_type(*values) for values in zip(*columns, strict=True))


def _column(table: str, frame: pd.DataFrame, name: str, convert: Callable[[object], object]) -> list[object]:
    values: list[object] = frame[name].tolist()
    try:
        return [convert(None if _is_blank(value) else value) for value in values]
    except (TypeError, ValueError) as error:
        where = f"table {table!r}, column {name!r}"
        raise ReportError(where, str(error), "values of one kind", "correct the table") from error


def _is_blank(value: object) -> bool:
    return value is None or value is pd.NA or (isinstance(value, float) and math.isnan(value))


def _text(value: object) -> str:
    return "" if value is None else str(value)


def _number(value: object) -> float:
    return math.nan if value is None else float(str(value))


def _integer(value: object) -> int | None:
    if value is None:
        return None
    number = float(str(value))
    if not number.is_integer():
        raise ValueError(f"{value!r} in a column of whole numbers")
    return int(number)


def _flag(value: object) -> bool | None:
    return None if value is None else bool(value)


_CONVERTERS: Mapping[object, Callable[[object], object]] = types.MappingProxyType(
    {str: _text, float: _number, int | None: _integer, bool | None: _flag}
)
