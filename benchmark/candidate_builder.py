"""From the candidates of a study file to models: names looked up, options checked, grids expanded."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, fields
from typing import Any, get_type_hints

from pydantic import TypeAdapter, ValidationError

from steelyard.benchmark.candidates import Candidate
from steelyard.benchmark.errors import StudyError
from steelyard.benchmark.study_file import CandidateTable, StudyTable
from steelyard.datasets import Covariate, Registry, SteelyardError
from steelyard.datasets.errors import suggestion
from steelyard.models import Model, ModelClass, Need, TwoPart, model_registry
from steelyard.models.nesting import COVARIATE_FIELDS

__all__ = ["build_candidates"]

PART_KEYS = ("model", "covariates")


@dataclass(frozen=True)
class _Names:
    """What a candidate may refer to."""

    models: Registry[ModelClass]
    covariates: Mapping[str, Covariate]
    specifications: Mapping[str, list[str]]


def build_candidates(
    table: StudyTable, covariates: Mapping[str, Covariate], name: str
) -> tuple[Candidate, ...]:
    """Every candidate of a study file, in order.

    Raises
    ------
    StudyError : with one sentence for each candidate or specification that cannot be used
    """
    names = _Names(model_registry(), covariates, table.specifications)
    problems = [
        f"{name}, specifications.{key}: there is no covariate '{c}'; {suggestion(c, covariates)}"
        for key, listed in table.specifications.items()
        for c in listed
        if c not in covariates
    ]
    found: list[Candidate] = []
    for number, entry in enumerate(table.candidates, start=1):
        try:
            found.extend(_expanded(entry, names))
        except SteelyardError as error:
            where = f"{name}, candidates {number}" + (f" ('{entry.label}')" if entry.label else "")
            problems.append(f"{where}: {error}")
    labels = [c.label for c in found]
    for label in sorted({x for x in labels if labels.count(x) > 1}):
        problems.append(f"{name}, candidates: the label '{label}' is used more than once; labels must differ")
    if problems:
        raise StudyError(*problems)
    return tuple(found)


def _expanded(entry: CandidateTable, names: _Names) -> Iterator[Candidate]:
    """One candidate, or every pair of a grid of links and weights."""
    options = dict(entry.model_extra or {})
    two = entry.links is not None or entry.weights is not None
    if (entry.model is not None) == two:
        raise StudyError('give either model = "...", or both links = {...} and weights = {...}')
    if not two:
        assert entry.model is not None  # checked just above
        model = _model({"model": entry.model, "covariates": entry.covariates, **options}, names)
        yield Candidate(entry.label or model.name, model)
        return
    if entry.links is None or entry.weights is None:
        raise StudyError("a two-part candidate needs both links = {...} and weights = {...}")
    if options or entry.covariates is not None:
        extra = ", ".join([*options, *(["covariates"] if entry.covariates is not None else [])])
        raise StudyError(f"write {extra} inside links = {{...}} or weights = {{...}}, where it belongs")
    grid = isinstance(entry.links, list) or isinstance(entry.weights, list)
    for links in _listed(entry.links):
        for weights in _listed(entry.weights):
            model = TwoPart(_model(links, names), _model(weights, names))
            label = f"{entry.label}: {model.name}" if grid and entry.label else entry.label or model.name
            yield Candidate(label, model)


def _listed(part: dict[str, Any] | list[dict[str, Any]]) -> list[dict[str, Any]]:
    return part if isinstance(part, list) else [part]


def _model(keys: Mapping[str, Any], names: _Names) -> Model:
    """Look a model up and give it its options."""
    name = keys.get("model")
    if not isinstance(name, str):
        raise StudyError(f'a part needs model = "..."; got {dict(keys)!r}')
    chosen = names.models.get(name)
    options = {k: _frozen(v) for k, v in keys.items() if k not in PART_KEYS}
    known = [f.name for f in fields(chosen) if f.name != "covariates"]
    for key in options:
        if key not in known:
            hint = suggestion(key, known) if known else "it has no options"
            raise StudyError(f"the model '{name}' has no option '{key}'; {hint}")
    covariates = _covariate_names(name, chosen.requires.covariates, keys.get("covariates"), names)
    if covariates is not None:
        options["covariates"] = covariates
    for key in set(COVARIATE_FIELDS) & options.keys() - {"covariates"}:
        # A second index, such as the inflation of zeros, takes covariates of its own in the same ways.
        options[key] = _covariate_names(name, Need.OPTIONAL, keys[key], names) or ()
    return chosen(**_checked_options(chosen, options))


def _checked_options(chosen: ModelClass, options: Mapping[str, Any]) -> dict[str, Any]:
    """Options of the types that the model's fields declare; no value is converted to fit."""
    hints = get_type_hints(chosen)
    checked: dict[str, Any] = {}
    for key, value in options.items():
        try:
            checked[key] = TypeAdapter(hints[key]).validate_python(value, strict=True)
        except ValidationError as error:
            said = error.errors()[0]["msg"].removeprefix("Input ")
            raise StudyError(f"the option '{key}' {said}; got {value!r}") from None
    return checked


def _covariate_names(model: str, need: Need, given: object, names: _Names) -> tuple[str, ...] | None:
    """The covariates of a candidate: a specification's name or a list of names.

    None where the model takes no covariates at all.
    """
    if given is None:
        if need is Need.REQUIRED:
            raise StudyError(
                f"the model '{model}' needs covariates = \"...\" (a specification or a list of names)"
            )
        return None if need is Need.NONE else ()
    if need is Need.NONE:
        raise StudyError(f"the model '{model}' takes no covariates; remove them")
    if isinstance(given, str):
        if given not in names.specifications:
            hint = suggestion(given, names.specifications)
            raise StudyError(f"there is no specification '{given}'; {hint}")
        # A specification's own names are checked once, where it is defined.
        return tuple(names.specifications[given])
    if not isinstance(given, list) or not all(isinstance(c, str) for c in given):
        raise StudyError(f"covariates must be a specification's name or a list of names; got {given!r}")
    for covariate in given:
        if covariate not in names.covariates:
            raise StudyError(
                f"there is no covariate '{covariate}'; {suggestion(covariate, names.covariates)}"
            )
    if len(set(given)) < len(given):
        raise StudyError(f"a covariate is listed twice in {given!r}; list each once")
    return tuple(given)


def _frozen(value: Any) -> Any:
    """Lists of a TOML file as tuples, since options are frozen."""
    return tuple(_frozen(v) for v in value) if isinstance(value, list) else value
