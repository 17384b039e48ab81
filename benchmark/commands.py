"""What each command does; every one returns its exit status and the text to print."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime
from importlib.resources import files
from pathlib import Path
from textwrap import fill, indent

from steelyard.benchmark.directory import RunDirectory
from steelyard.benchmark.engine import run, study_tasks
from steelyard.benchmark.facts import data_facts, method_sheet
from steelyard.benchmark.options import option_meanings
from steelyard.benchmark.study import Study, load_study, study_from_text
from steelyard.datasets import BrokenPlugin, DataSet, dataset_registry
from steelyard.models import ModelClass, Need, model_registry
from steelyard.reports import CellKind, Column, Table, render_text

__all__ = [
    "check_study",
    "list_datasets",
    "list_models",
    "run_demo",
    "run_study",
    "show_dataset",
    "show_model",
    "write_report",
]

Answer = tuple[int, str]
DONE, SOME_FAILED = 0, 3
WIDTH = 98


def run_study(
    study: Study, directory: Path, *, jobs: int | None, fresh: bool, progress: bool | None
) -> Answer:
    """Run a study into a directory and write its reports; status 3 when some candidates failed."""
    place = RunDirectory(directory)
    place.prepare(fresh=fresh)
    started = _now()
    results = run(study, ledger=place.ledger, jobs=jobs, progress=progress)
    place.keep_study(study)
    place.keep_provenance(study, results, started, _now())
    written = results.report(directory)
    unusable = _broken_lines([*model_registry().load_all()[1], *dataset_registry().load_all()[1]])
    text = "\n".join([results.summary(), "", *unusable, _written(written, directory)])
    return (SOME_FAILED if results.n_failed else DONE), text


def run_demo(directory: Path, *, jobs: int | None, fresh: bool, progress: bool | None) -> Answer:
    """Run the embedded study of the invented islands."""
    text = files("steelyard.benchmark").joinpath("demo/islands.toml").read_text(encoding="utf-8")
    study = study_from_text(text, folder=Path(), name="islands.toml")
    return run_study(study, directory, jobs=jobs, fresh=fresh, progress=progress)


def write_report(directory: Path) -> Answer:
    """Write the reports of a finished run again."""
    return DONE, _written(RunDirectory(directory).results().report(directory), directory)


def check_study(path: Path) -> Answer:
    """Read a study and its data, and say what a run would do."""
    study = load_study(path)
    lines = [study.title, "", "data"]
    lines += [f"  {label:<22}{value}" for label, value in data_facts(study.network)]
    lines += ["", render_text(_candidate_table(study)).rstrip(), "", "work ahead"]
    lines += [
        f"  {s.folds} folds x {s.repeats} repeats of {s.name}, both directions of a pair together"
        for s in study.validation
    ] or ['  no cross-validation: add [[validation]] with scheme = "dyads" to compare out of sample']
    fits = len(study_tasks(study))
    lines += [f"  {fits} fit{'s' if fits > 1 else ''} in all"]
    return DONE, "\n".join(lines)


def _candidate_table(study: Study) -> Table:
    columns = (
        Column("candidate", "candidate", CellKind.TEXT),
        Column("model", "model", CellKind.TEXT),
        Column("family", "family", CellKind.TEXT),
        Column("information", "is told", CellKind.TEXT),
    )
    rows = tuple(
        (c.label, c.model.name, c.model.family.value, c.model.information.value) for c in study.candidates
    )
    return Table("candidates", f"candidates ({len(rows)})", columns, rows, ())


def list_models() -> Answer:
    """One line a model, and the plugins that cannot be used."""
    found, broken = model_registry().load_all()
    columns = (
        Column("name", "model", CellKind.TEXT),
        Column("part", "explains", CellKind.TEXT),
        Column("family", "family", CellKind.TEXT),
        Column("measure", "measure", CellKind.TEXT),
        Column("covariates", "covariates", CellKind.TEXT),
        Column("information", "is told", CellKind.TEXT),
    )
    rows = tuple(_model_row(model) for model in found.values())
    table = Table("models", "Models", columns, rows, ("steelyard models NAME prints a method sheet",))
    return DONE, "\n".join([render_text(table), *_broken_lines(broken)])


def _model_row(model: ModelClass) -> tuple[str, ...]:
    measure = "mean only" if model.measure is None else model.measure.value
    covariates = {Need.NONE: "none", Need.OPTIONAL: "optional", Need.REQUIRED: "needed"}[
        model.requires.covariates
    ]
    part = "both" if model.part.value == "joint" else model.part.value
    return (model.name, part, model.family.value, measure, covariates, model.information.value)


def show_model(name: str) -> Answer:
    """A model's method sheet."""
    model = model_registry().get(name)
    sheet = method_sheet(model)
    entries = (
        ("assumes", sheet.summary),
        ("formula", sheet.formula),
        ("estimated", sheet.parameters),
        ("is told", model.information.value),
        ("scored on", "; ".join(sorted(h.value for h in model.holdouts))),
        ("networks", " and ".join(sorted("directed" if d else "undirected" for d in model.directed))),
        ("beware", sheet.caution),
        ("sources", sheet.sources),
        *((f"option {option}", meaning) for option, meaning in option_meanings(model)),
    )
    return DONE, "\n".join([f"{name} ({sheet.family}, {model.part.value})", *(_entry(*e) for e in entries)])


def list_datasets() -> Answer:
    """One line a data set, and the plugins that cannot be used."""
    found, broken = dataset_registry().load_all()
    columns = (
        Column("name", "data set", CellKind.TEXT),
        Column("periods", "periods", CellKind.TEXT),
        Column("summary", "flows", CellKind.TEXT),
    )
    rows = tuple((d.name, _periods(d), d.summary) for d in found.values())
    table = Table("datasets", "Data sets", columns, rows, ("steelyard datasets NAME says more",))
    return DONE, "\n".join([render_text(table), *_broken_lines(broken)])


def show_dataset(name: str) -> Answer:
    """Columns, source and size of a data set."""
    data = dataset_registry().get(name)
    network = data.load()
    latest = f" (period {network.period})" if network.period else ""
    entries = [
        ("flows", data.summary),
        ("periods", _periods(data)),
        ("source", data.provenance.source),
        ("licence", data.provenance.licence),
        ("steps", "; ".join(data.provenance.steps) or "none"),
        *((f"column {column}", meaning) for column, meaning in data.described),
        *((f"{label}{latest}", value) for label, value in data_facts(network)),
    ]
    return DONE, "\n".join([name, *(_entry(*e) for e in entries)])


def _periods(data: DataSet) -> str:
    return f"{data.periods[0]} to {data.periods[-1]}" if len(data.periods) > 1 else "one"


def _entry(label: str, text: str) -> str:
    """A label and its text, wrapped under itself."""
    head = f"  {label:<12} " if len(label) <= 12 else f"  {label}\n  {'':<12} "
    body = indent(fill(text, WIDTH - 15), " " * 15).lstrip()
    return head + body


def _broken_lines(broken: Sequence[BrokenPlugin]) -> list[str]:
    return [f"not usable: {b.reason}" for b in broken]


def _written(paths: Sequence[Path], directory: Path) -> str:
    pages = [p for p in paths if p.name == "report.html"]
    first = f"open {pages[0]}" if pages else f"see {directory}"
    return f"{len(paths)} files written below {directory}; {first}"


def _now() -> str:
    return datetime.now(UTC).isoformat(timespec="seconds")
