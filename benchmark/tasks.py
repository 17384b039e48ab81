"""The pieces of a run: fit one candidate to everything, or fit it to one training set and score the test set."""

from __future__ import annotations

import hashlib
import inspect
import json
import time
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import asdict, dataclass
from functools import cache
from importlib.metadata import version
from importlib.resources import files
from pathlib import Path
from typing import Any, cast

import numpy as np

from steelyard.benchmark.candidates import Candidate
from steelyard.benchmark.evaluation import log_densities, score_rows
from steelyard.benchmark.footing import Footing, Scope
from steelyard.benchmark.scores import Score, score_registry
from steelyard.benchmark.specification.pairs import Evaluated
from steelyard.benchmark.specification.single import single_findings
from steelyard.benchmark.splits import Fold
from steelyard.datasets import Dyads, Floats
from steelyard.models import Estimates, Fitted, Law, Measure, Model, ModelError, Part

__all__ = ["Outcome", "Task", "TaskResult", "execute", "task_key"]

PACKAGES = ("datasets", "models", "benchmark")


@dataclass(frozen=True)
class Task:
    """One candidate on all dyads (`fold` is None) or on one division of them."""

    candidate: Candidate
    fold: Fold | None

    @property
    def scheme(self) -> str:
        """Name of the scheme, or 'full'."""
        return "full" if self.fold is None else self.fold.scheme.name


@dataclass(frozen=True)
class Outcome:
    """scored, failed (with a reason) or not_applicable (with a reason)."""

    outcome: str
    reason: str


@dataclass(frozen=True)
class TaskResult:
    """What a task leaves: plain values, so that the ledger can hold them.

    Attributes
    ----------
    outcome : how it ended
    payload : rows for the tables, by table name; empty unless scored
    seconds : how long it took
    lasting : whether a later run may reuse it; an unforeseen exception is tried again
    evaluated : arrays of a full fit for tests of two candidates; too large for the ledger, so a kept result
        has none
    """

    outcome: Outcome
    payload: Mapping[str, Any]
    seconds: float
    lasting: bool
    evaluated: Evaluated | None = None


def execute(task: Task, dyads: Dyads) -> TaskResult:
    """Do one task; whatever the candidate raises becomes an outcome."""
    started = time.perf_counter()
    lasting = True
    payload: dict[str, Any] = {}
    evaluated = None
    try:
        refusal = _not_applicable(task, dyads)
        if refusal:
            outcome = Outcome("not_applicable", refusal)
        else:
            # Overflow to infinity is an answer that the scores count and show; it needs no warning besides.
            with np.errstate(over="ignore"):
                if task.fold is None:
                    payload, outcome, evaluated = _full(task, dyads)
                else:
                    payload, outcome = _fold(task, task.fold, dyads)
    except ModelError as error:
        outcome = Outcome("failed", str(error))
    except Exception as error:  # noqa: BLE001 - a model may be a stranger's plugin, which may raise anything
        lasting = False
        outcome = Outcome("failed", f"{type(error).__name__}: {error}")
    return TaskResult(outcome, payload, time.perf_counter() - started, lasting, evaluated)


def _not_applicable(task: Task, dyads: Dyads) -> str:
    model = task.candidate.model
    if dyads.directed not in model.directed:
        otherwise = f" with these options; {model.requires.otherwise}" if model.requires.otherwise else ""
        kind = "directed" if dyads.directed else "undirected"
        return f"{model.name} is not defined for {kind} networks{otherwise}"
    if task.fold is not None and task.fold.holdout not in model.holdouts:
        return f"{model.name} cannot be scored on {task.fold.holdout.value}"
    return ""


def _full(task: Task, dyads: Dyads) -> tuple[dict[str, Any], Outcome, Evaluated]:
    """Fit to all dyads: a row of `candidates`, rows of `estimates` and `tests`, and evidence for criteria."""
    model = task.candidate.model
    fitted = model.fit(dyads)
    convergence = fitted.convergence
    messages = [convergence.message] if convergence.message else []
    if model.measure is None:
        messages.append("states a mean only, so it has no log-likelihood, no criteria and no log score")
    evidence, evaluated = _evaluation(model, fitted, dyads)
    impossible = next((e["n_impossible"] for e in evidence if e["native"]), 0)
    if impossible:
        messages.append(f"{impossible} observed dyads are impossible under the fit")
    totals = {e["shown_as"]: e["log_likelihood"] for e in evidence}
    links, weights = task.candidate.part_names
    row = {
        "family": model.family.value,
        "links": links,
        "weights": weights,
        "information": model.information.value + ("; links given" if model.part is Part.WEIGHTS else ""),
        "measure": "none (mean only)" if model.measure is None else model.measure.value,
        "footing": next((e["footing"] for e in evidence if e["native"]), Footing.of(dyads, None).text),
        "n_nodes": dyads.n_nodes,
        "n_dyads": next((e["n_dyads"] for e in evidence if e["native"]), len(dyads)),
        "n_links": dyads.n_links,
        "n_parameters": fitted.n_parameters,
        "log_likelihood": totals.get("log_likelihood", np.nan),
        "log_likelihood_links": totals.get("log_likelihood_links", np.nan),
        "log_likelihood_weights": totals.get("log_likelihood_weights", np.nan),
        "converged": convergence.converged,
        "iterations": convergence.iterations,
        "residual": convergence.residual,
        "message": "; ".join(messages),
    }
    tests = [{"test": test, **asdict(found)} for test, found in single_findings(model, fitted, dyads)]
    estimates = list(_estimate_rows(fitted.estimates))
    payload = {"candidates": row, "estimates": estimates, "evidence": evidence, "tests": tests}
    return payload, Outcome("scored", _doubt(fitted)), evaluated


def _evaluation(model: Model, fitted: Fitted, dyads: Dyads) -> tuple[list[dict[str, Any]], Evaluated]:
    """Evidence on every footing, and the arrays that tests of two candidates need, worked out in row blocks."""
    totals: dict[Footing, list[float]] = {}
    kept: dict[str, list[Floats]] = {}
    means: list[Floats] = []
    chances: list[Floats] = []
    for block in dyads.blocks():
        if model.part is Part.JOINT:
            means.append(fitted.expected_weight(block))
        if model.measure is None:
            continue
        law = cast(Law, fitted).distribution(block)
        if model.part is Part.JOINT:
            chances.append(law.link_probability)
        for found in log_densities(law, model.part, block, dyads):
            total = totals.setdefault(found.footing, [0.0, 0, 0])
            total[0] += float(found.values.sum())
            total[1] += len(found.values)
            total[2] += int(np.isneginf(found.values).sum())
            if _is_maximum(found.footing, model.part):
                kept.setdefault(found.footing.text, []).append(found.values)
    evaluated = Evaluated.of(
        fitted,
        {text: np.concatenate(values) for text, values in kept.items()},
        np.concatenate(means) if means else None,
        np.concatenate(chances) if chances else None,
    )
    return list(_evidence(model, fitted, totals)), evaluated


def _is_maximum(footing: Footing, part: Part) -> bool:
    """Whether a likelihood is at its maximum there (through cells, nearly so).

    The parts of a joint law are not maximised one by one, so only whole laws and one-part models are.
    """
    whole = Scope.GIVEN_LINKS if part is Part.WEIGHTS else Scope.WHOLE
    return footing.scope is whole and (footing.measure is not Measure.LINKS or part is Part.LINKS)


def _evidence(
    model: Model, fitted: Fitted, totals: Mapping[Footing, list[float]]
) -> Iterator[dict[str, Any]]:
    """Log-likelihoods on every footing."""
    if model.measure is None:
        return
    measure = cast(Law, fitted).measure
    whole = Scope.GIVEN_LINKS if model.part is Part.WEIGHTS else Scope.WHOLE
    for footing, (log_likelihood, n, impossible) in totals.items():
        native = footing.measure is measure and footing.scope is whole
        yield {
            "footing": footing.text,
            "native": native,
            "shown_as": _shown_as(footing, measure, native),
            # A criterion needs the maximum of the very likelihood that it is worked out from.
            "criteria": _is_maximum(footing, model.part),
            "log_likelihood": log_likelihood,
            "n_parameters": fitted.n_parameters,
            "n_dyads": int(n),
            "n_impossible": int(impossible),
        }


def _shown_as(footing: Footing, measure: Measure, native: bool) -> str:
    """Column of `candidates` for a log-likelihood; empty for those of a law of amounts on counts."""
    if native:
        return "log_likelihood"
    if footing.measure is Measure.LINKS:
        return "log_likelihood_links"
    return "log_likelihood_weights" if footing.measure is measure else ""


def _fold(task: Task, fold: Fold, dyads: Dyads) -> tuple[dict[str, Any], Outcome]:
    """Fit to the training dyads, score the test dyads."""
    model = task.candidate.model
    training, test = fold.divide(dyads)
    fitted = model.fit(training)
    rows = score_rows(fitted, model.part, model.measure, test, dyads, _scores())
    return {"scores": [asdict(row) for row in rows]}, Outcome("scored", _doubt(fitted))


def _doubt(fitted: Fitted) -> str:
    """Why a scored fit is not to be trusted; empty for a certified one."""
    found = fitted.convergence
    return "" if found.converged else f"not certified: {found.message or 'no reason given'}"


def _scores() -> Iterable[Score]:
    return score_registry().load_all()[0].values()


def _estimate_rows(estimates: Estimates) -> Iterator[dict[str, Any]]:
    """A row for each estimate and kind of standard error; one without any kind keeps one row."""
    for estimate in estimates:
        common = {"part": estimate.part.value, "term": estimate.term, "estimate": estimate.value}
        note = estimate.note or ("" if estimate.status.value == "free" else estimate.status.value)
        for kind in estimate.standard_errors:
            found = estimate.interval(kind)
            yield {
                **common,
                "se_kind": kind.value,
                "se": estimate.standard_errors[kind],
                **asdict(found),
                "note": estimate.note_for(kind) or note,
            }
        if not estimate.standard_errors:
            yield {
                **common,
                "se_kind": "",
                **dict.fromkeys(("se", "z", "p_value", "lower", "upper")),
                "note": note,
            }


def task_key(task: Task, dyads: Dyads, covariates: str) -> str:
    """Digest of everything that a task's result depends on: data, candidate, division and code.

    Parameters
    ----------
    covariates : definitions of the study's covariates as text
    """
    parts = {
        "dyads": dyads.digest,
        "covariates": covariates,
        "model": repr(task.candidate.model),
        "model_code": [_source_digest(type(m)) for m in task.candidate.parts],
        "fold": repr(task.fold),
        "scores": [(s.name, _source_digest(s.values)) for s in _scores()],
        "code": _code_digest(),
    }
    return hashlib.sha256(json.dumps(parts, sort_keys=True).encode()).hexdigest()


@cache
def _source_digest(thing: Callable[..., object]) -> str:
    """Digest of the file that defines a class or function; a plugin's code counts as much as ours."""
    source = inspect.getsourcefile(thing)
    return "" if source is None else hashlib.sha256(Path(source).read_bytes()).hexdigest()


@cache
def _code_digest() -> str:
    """Digest of Steelyard's own source and of the numerical libraries' versions."""
    total = hashlib.sha256("".join(version(p) for p in ("numpy", "scipy", "pandas")).encode())
    for package in PACKAGES:
        root = Path(str(files(f"steelyard.{package}")))
        for path in sorted(root.rglob("*.py")):
            total.update(str(path.relative_to(root)).encode() + path.read_bytes())
    return total.hexdigest()
