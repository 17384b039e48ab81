"""Runs: the same tables whatever the number of jobs, resumed or not; failures are data."""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from pathlib import Path
from typing import ClassVar

import numpy as np
import pandas as pd
import pytest

from steelyard.benchmark import Candidate, Study, StudyError, run
from steelyard.benchmark.engine import study_tasks
from steelyard.benchmark.ledger import Ledger
from steelyard.benchmark.tasks import execute, task_key
from steelyard.models import ModelError
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.reports.writing import csv_bytes


def as_bytes(results) -> dict[str, bytes]:
    return {name: csv_bytes(frame) for name, frame in results.tables.items()}


def test_jobs_and_resuming_do_not_change_a_byte(small_study: Study, tmp_path: Path) -> None:
    once = run(small_study, jobs=1, progress=False)
    twice = run(small_study, jobs=2, progress=False)
    assert as_bytes(once) == as_bytes(twice)
    # A ledger that holds some of the tasks, as after an interruption.
    with Ledger(tmp_path / "ledger.sqlite") as book:
        covariates = repr(sorted(small_study.covariates.items()))
        for task in study_tasks(small_study)[::2]:
            book.keep(task_key(task, small_study.dyads, covariates), execute(task, small_study.dyads))
    resumed = run(small_study, ledger=tmp_path / "ledger.sqlite", jobs=1, progress=False)
    assert as_bytes(once) == as_bytes(resumed)


def test_finished_tasks_are_not_done_again(small_study: Study, tmp_path: Path, monkeypatch) -> None:
    path = tmp_path / "ledger.sqlite"
    first = run(small_study, ledger=path, jobs=1, progress=False)
    monkeypatch.setattr(
        "steelyard.benchmark.engine.execute", lambda *_: pytest.fail("a finished task was redone")
    )
    assert as_bytes(run(small_study, ledger=path, jobs=1, progress=False)) == as_bytes(first)


def test_a_changed_study_redoes_only_what_changed(small_study: Study, tmp_path: Path) -> None:
    covariates = repr(sorted(small_study.covariates.items()))
    tasks = study_tasks(small_study)
    keys = [task_key(t, small_study.dyads, covariates) for t in tasks]
    assert len(set(keys)) == len(keys)
    relabelled = replace(tasks[0], candidate=replace(tasks[0].candidate, label="other"))
    assert task_key(relabelled, small_study.dyads, covariates) == keys[0]  # a label is no part of the result
    other = replace(tasks[0], candidate=Candidate("Poisson", PoissonModel(())))
    assert task_key(other, small_study.dyads, covariates) != keys[0]
    assert task_key(tasks[0], small_study.dyads, covariates + "x") != keys[0]


def test_tables_say_what_was_done(small_study: Study) -> None:
    results = run(small_study, jobs=1, progress=False)
    assert list(results.candidates["candidate"]) == ["Poisson", "Logit, lognormal", "Degrees, geometric"]
    assert results.candidates["converged"].all()
    assert (results.candidates["residual"] <= 1e-8).all()
    parts = results.candidates["log_likelihood_links"] + results.candidates["log_likelihood_weights"]
    assert np.allclose(parts, results.candidates["log_likelihood"], rtol=1e-12)
    counts = results.criteria[results.criteria["footing"].str.startswith("counts ·")]
    assert set(counts["candidate"]) == {"Poisson", "Logit, lognormal", "Degrees, geometric"}
    for _, group in results.criteria.groupby(["footing", "criterion"]):
        assert group["delta"].min() == 0.0
        assert group["weight"].sum() == pytest.approx(1.0)
    assert set(results.outcomes["outcome"]) == {"scored"}
    assert len(results.outcomes) == 3 * (1 + 3)
    folds = results.scores[(results.scores["score"] == "brier")].groupby("candidate")["n_dyads"].sum()
    assert (folds == small_study.network.n_dyads).all()


@dataclass(frozen=True)
class Stubborn(PoissonModel):
    """A Poisson that fails on purpose, in the way its option says."""

    covariates: tuple[str, ...] = ()
    way: str = "refuses"
    directed: ClassVar[frozenset[bool]] = frozenset({True})

    def fit(self, dyads, /):
        if self.way == "refuses":
            raise ModelError("these dyads do not suit me")
        if self.way == "crashes":
            raise ZeroDivisionError("a bug in a plugin")
        return super().fit(dyads)


@pytest.mark.parametrize(
    ("way", "reason"),
    [("refuses", "these dyads do not suit me"), ("crashes", "ZeroDivisionError: a bug in a plugin")],
)
def test_a_failing_candidate_stops_nothing(small_study: Study, tmp_path: Path, way: str, reason: str) -> None:
    study = replace(
        small_study, candidates=(*small_study.candidates, Candidate("Stubborn", Stubborn(way=way)))
    )
    results = run(study, ledger=tmp_path / "ledger.sqlite", jobs=1, progress=False)
    failed = results.outcomes[results.outcomes["candidate"] == "Stubborn"]
    assert set(failed["outcome"]) == {"failed"}
    assert set(failed["reason"]) == {reason}
    assert results.n_failed == 1
    assert len(results.candidates) == 3
    with Ledger(tmp_path / "ledger.sqlite") as book:
        key = task_key(study_tasks(study)[-1], study.dyads, repr(sorted(study.covariates.items())))
        # What a model refuses it will refuse again; a crash may have had another cause and is tried anew.
        assert (book.result(key) is not None) == (way == "refuses")


def test_what_a_model_cannot_be_scored_on_is_not_applicable(small_study: Study) -> None:
    @dataclass(frozen=True)
    class Shy(PoissonModel):
        covariates: tuple[str, ...] = ()
        holdouts = frozenset()

    study = replace(small_study, candidates=(Candidate("Shy", Shy()),))
    results = run(study, jobs=1, progress=False)
    assert list(results.outcomes["outcome"]) == ["scored"] + ["not_applicable"] * 3
    assert results.n_failed == 0


def test_jobs_must_be_positive(small_study: Study) -> None:
    with pytest.raises(StudyError, match="at least 1"):
        run(small_study, jobs=0)


def test_ledger_keeps_tables_and_infinities(tmp_path: Path) -> None:
    with Ledger(tmp_path / "l.sqlite") as book:
        book.keep_tables(
            {"scores": pd.DataFrame({"value": [np.inf, 1.5, np.nan], "candidate": ["NA", "b", ""]})}
        )
    with Ledger(tmp_path / "l.sqlite") as book:
        frame = book.table("scores")
        assert frame["value"].tolist()[:2] == [np.inf, 1.5]
        assert np.isnan(frame["value"][2])
        assert frame["candidate"].tolist() == ["NA", "b", ""]
        with pytest.raises(StudyError, match="not finished"):
            book.table("criteria")


def test_a_second_run_is_told_to_wait(tmp_path: Path) -> None:
    with Ledger(tmp_path / "l.sqlite") as book:
        book.note("a", "b")
        with pytest.raises(StudyError, match="in use by another run"):
            Ledger(tmp_path / "l.sqlite")


def test_a_damaged_ledger_is_named(tmp_path: Path) -> None:
    path = tmp_path / "l.sqlite"
    path.write_bytes(b"this is no database, but it is long enough to be looked at" * 40)
    with pytest.raises(StudyError, match="no ledger"):
        Ledger(path)
    assert path.read_bytes().startswith(b"this is no database")


def test_another_ledger_format_is_refused(tmp_path: Path) -> None:
    with Ledger(tmp_path / "l.sqlite") as book:
        book.note("format", "99")
    with pytest.raises(StudyError, match="format 99"):
        Ledger(tmp_path / "l.sqlite")


def test_payloads_survive_the_ledger_exactly(small_study: Study, tmp_path: Path) -> None:
    result = execute(study_tasks(small_study)[0], small_study.dyads)
    with Ledger(tmp_path / "l.sqlite") as book:
        book.keep("k", result)
        kept = book.result("k")
    assert kept is not None
    assert json.dumps(kept.payload) == json.dumps(result.payload)
