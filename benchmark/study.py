"""The study: a TOML file turned into objects. This is the only place where text becomes objects."""

from __future__ import annotations

import tomllib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from pydantic import ValidationError

from steelyard.benchmark.candidate_builder import build_candidates
from steelyard.benchmark.candidates import Candidate
from steelyard.benchmark.errors import StudyError
from steelyard.benchmark.schema_errors import schema_problems
from steelyard.benchmark.splits import DyadFolds
from steelyard.benchmark.study_file import CovariateTable, DataTable, StudyTable
from steelyard.datasets import (
    Columns,
    Covariate,
    DistanceCovariate,
    DyadCovariate,
    Dyads,
    End,
    FlowNetwork,
    MatchCovariate,
    NodeCovariate,
    Transform,
    dataset_registry,
    read_network,
)
from steelyard.datasets.errors import suggestion
from steelyard.reports import ReportFormat

__all__ = ["Study", "load_study", "study_from_text"]

SCHEMES = ("dyads",)


@dataclass(frozen=True, eq=False)
class Study:
    """Everything a run needs, worked out and checked.

    Attributes
    ----------
    title : of the report
    seed : from which every random division derives
    network : the flows
    covariates : their definitions, by name
    dyads : all dyads of the network, with the study's covariates
    candidates : in the order of the file
    validation : the cross-validation schemes
    formats : what to write
    text : the study file itself, kept with the results
    """

    title: str
    seed: int
    network: FlowNetwork
    covariates: Mapping[str, Covariate]
    dyads: Dyads
    candidates: tuple[Candidate, ...]
    validation: tuple[DyadFolds, ...]
    formats: frozenset[ReportFormat]
    text: str


def load_study(path: str | Path, /) -> Study:
    """Read a study file; data files are looked for beside it.

    Raises
    ------
    SteelyardError : the file or its data cannot be used; one sentence for each problem
    """
    path = Path(path)
    try:
        text = path.read_text(encoding="utf-8")
    except FileNotFoundError:
        raise StudyError(f"{path}: there is no such study file; check the path") from None
    except UnicodeDecodeError as error:
        raise StudyError(f"{path}: not UTF-8 text at byte {error.start}; save the file as UTF-8") from error
    except OSError as error:
        raise StudyError(f"{path}: cannot be read: {error.strerror or error}") from error
    return study_from_text(text, folder=path.parent, name=path.name)


def study_from_text(text: str, *, folder: Path, name: str = "study.toml") -> Study:
    """A study from the text of a study file.

    Parameters
    ----------
    text : TOML
    folder : where relative data paths start
    name : how messages call the file

    Raises
    ------
    SteelyardError : as for `load_study`
    """
    table = _parsed(text, name)
    covariates = _covariates(table, name)
    candidates = build_candidates(table, covariates, name)
    schemes = _schemes(table, name)
    network = _network(table.data, folder, name)
    return Study(
        title=table.title,
        seed=table.seed,
        network=network,
        covariates=covariates,
        dyads=Dyads(network, covariates),
        candidates=candidates,
        validation=schemes,
        formats=frozenset(ReportFormat(f) for f in table.report.formats),
        text=text,
    )


def _parsed(text: str, name: str) -> StudyTable:
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise StudyError(f"{name} is not valid TOML: {error}") from error
    try:
        return StudyTable.model_validate(raw)
    except ValidationError as error:
        raise StudyError(*schema_problems(error, name)) from None


def _schemes(table: StudyTable, name: str) -> tuple[DyadFolds, ...]:
    schemes: list[DyadFolds] = []
    problems: list[str] = []
    for number, entry in enumerate(table.validation, start=1):
        if entry.scheme not in SCHEMES:
            problems.append(
                f"{name}, validation {number}: there is no scheme '{entry.scheme}' in this version; "
                f"{suggestion(entry.scheme, SCHEMES)}"
            )
        elif schemes:
            problems.append(
                f"{name}, validation {number}: the scheme '{entry.scheme}' is listed twice; keep one"
            )
        else:
            schemes.append(DyadFolds(entry.folds, entry.repeats, table.seed))
    if problems:
        raise StudyError(*problems)
    return tuple(schemes)


def _network(data: DataTable, folder: Path, name: str) -> FlowNetwork:
    period = None if data.period is None else str(data.period)
    if (data.dataset is None) == (data.flows is None):
        raise StudyError(f'{name}, data: give either dataset = "..." or flows = "x.csv", and not both')
    if data.dataset is not None:
        if data.nodes or data.dyads or data.columns:
            raise StudyError(f"{name}, data: nodes, dyads and columns go with flows, not with dataset")
        dataset = dataset_registry().get(data.dataset, where=f"{name}, data")
        return dataset.load(directed=data.directed, unit=data.unit, period=period)
    columns = Columns(**data.columns.model_dump()) if data.columns else Columns()
    flows, nodes, dyads = (None if f is None else folder / f for f in (data.flows, data.nodes, data.dyads))
    assert flows is not None  # one of dataset and flows is given, checked above
    return read_network(
        flows, nodes, dyads, columns=columns, directed=data.directed, unit=data.unit, period=period
    )


def _covariates(table: StudyTable, name: str) -> dict[str, Covariate]:
    covariates: dict[str, Covariate] = {}
    problems: list[str] = []
    for label, entry in table.covariates.items():
        try:
            covariates[label] = _covariate(entry)
        except StudyError as error:
            problems.extend(f"{name}, covariates.{label}: {p}" for p in error.problems)
    if problems:
        raise StudyError(*problems)
    return covariates


def _covariate(entry: CovariateTable) -> Covariate:
    """One covariate; which keys go together depends on where it is read from."""
    given = [key for key in ("node", "dyad", "coordinates") if getattr(entry, key) is not None]
    if len(given) != 1:
        got = " and ".join(given) or "none of them"
        raise StudyError(f"give exactly one of node, dyad and coordinates; got {got}")
    transform = Transform(entry.transform)
    if entry.node is not None and entry.match:
        if entry.end is not None or transform is not Transform.NONE:
            raise StudyError("match = true compares both ends, so end and transform do not go with it")
        return MatchCovariate(entry.node)
    if entry.match:
        raise StudyError("match = true goes with node")
    if entry.node is not None:
        if entry.end is None:
            raise StudyError('a node column needs end = "origin", "destination", "both" or "difference"')
        return NodeCovariate(entry.node, End(entry.end), transform)
    if entry.end is not None:
        raise StudyError(f"end goes with node, not with {given[0]}")
    if entry.dyad is not None:
        return DyadCovariate(entry.dyad, transform)
    latitude, longitude = entry.coordinates or ["", ""]
    return DistanceCovariate(latitude, longitude, transform)
