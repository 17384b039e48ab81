"""The study file as TOML holds it: shapes only. Turning it into objects is the work of `study.py`."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field

__all__ = ["CandidateTable", "CovariateTable", "DataTable", "StudyTable", "ValidationTable"]


class _Strict(BaseModel):
    """Unknown keys and values of another type are refused, never guessed at."""

    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class ColumnsTable(_Strict):
    origin: str = "origin"
    destination: str = "destination"
    flow: str = "flow"
    node: str = "node"
    period: str | None = None


class DataTable(_Strict):
    dataset: str | None = None
    flows: str | None = None
    nodes: str | None = None
    dyads: str | None = None
    columns: ColumnsTable | None = None
    directed: bool = True
    unit: float = Field(default=1.0, gt=0, allow_inf_nan=False)
    period: int | str | None = None


class CovariateTable(_Strict):
    node: str | None = None
    dyad: str | None = None
    coordinates: list[str] | None = Field(default=None, min_length=2, max_length=2)
    end: Literal["origin", "destination", "both", "difference"] | None = None
    transform: Literal["none", "log", "log1p", "square", "standardise"] = "none"
    match: bool = False


class CandidateTable(BaseModel):
    """A candidate; keys that are not listed here are options of its model and are checked against it."""

    model_config = ConfigDict(extra="allow", frozen=True, strict=True)

    label: str | None = Field(default=None, min_length=1)
    model: str | None = None
    covariates: str | list[str] | None = None
    links: dict[str, Any] | list[dict[str, Any]] | None = None
    weights: dict[str, Any] | list[dict[str, Any]] | None = None


class ValidationTable(_Strict):
    scheme: str
    folds: int = Field(default=10, ge=2)
    repeats: int = Field(default=1, ge=1)


class ReportTable(_Strict):
    formats: list[Literal["html", "markdown", "csv"]] = ["html", "markdown", "csv"]


class StudyTable(_Strict):
    title: str = Field(min_length=1)
    seed: int = Field(ge=0)
    data: DataTable
    covariates: dict[str, CovariateTable] = {}
    specifications: dict[str, list[str]] = {}
    candidates: list[CandidateTable] = Field(min_length=1)
    validation: list[ValidationTable] = []
    report: ReportTable = ReportTable()
