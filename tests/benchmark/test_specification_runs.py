"""Tests of specification in a run: which rows there are, that each says something, and that they stay the same."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import ClassVar

import numpy as np
import pandas as pd
import pytest

from steelyard.benchmark import Candidate, Study, run, study_from_text
from steelyard.benchmark.engine import study_tasks
from steelyard.benchmark.ledger import Ledger
from steelyard.benchmark.specification.single import ADDED
from steelyard.benchmark.tasks import execute, task_key
from steelyard.datasets import CovariateError
from steelyard.models import Convergence, Measure, ModelError
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.models.estimates import ErrorKind
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.linear_index import node_pairs
from steelyard.reports.writing import csv_bytes

SIZES = ("distance",)


def candidates_of(study: Study, *models: object) -> Study:
    added = tuple(Candidate(f"{m.name} {n}", m) for n, m in enumerate(models))  # type: ignore[attr-defined]
    return replace(study, candidates=(*study.candidates, *added), validation=())


def chosen(tests: pd.DataFrame, candidate: str, test: str, text: str = "") -> pd.DataFrame:
    rows = tests[(tests["candidate"] == candidate) & (tests["test"] == test)]
    return rows[rows["against"].str.contains(text, regex=False)]


def test_every_row_has_a_statistic_or_a_reason(small_study: Study) -> None:
    tests = run(small_study, jobs=1, progress=False).tests
    assert list(tests.columns) == ["candidate", "test", "against", "statistic", "p_value", "note"]
    computed = tests["statistic"].notna()
    assert (tests.loc[computed, "p_value"].between(0, 1)).all()
    assert tests.loc[~computed, "p_value"].isna().all()
    assert tests.loc[~computed, "note"].str.startswith("not computed: ").all()
    assert (tests["note"].str.len() > 0).all()
    assert not tests["note"].str.contains("reject|Error:", regex=True).any()
    assert not tests.duplicated(["candidate", "test", "against"]).any()


def test_what_concerns_whom_follows_from_declarations(small_study: Study) -> None:
    tests = run(small_study, jobs=1, progress=False).tests
    assert set(tests.loc[tests["test"] == "overdispersion", "candidate"]) == {"Poisson"}
    assert set(tests.loc[tests["test"] == "park", "candidate"]) == set(tests["candidate"])
    assert len(chosen(tests, "Poisson", "park", "proportional to the mean")) == 2
    assert len(chosen(tests, "Degrees, geometric", "reset", "links")) == 1  # no covariates: one row says so
    assert len(chosen(tests, "Logit, lognormal", "reset", "fitted log (F)")) == 1
    # Amounts meet counts through cells, and the row says so.
    cells = chosen(tests, "Poisson", "vuong", "Logit, lognormal; raw")
    assert cells["note"].str.contains("through cells").all()
    assert len(chosen(tests, "Poisson", "rival_zeros", "Logit, lognormal")) == 2
    by_node = chosen(tests, "Degrees, geometric", "rival_zeros")
    assert by_node["note"].str.contains("a parameter for each node").all()


def test_reset_is_the_refit_with_the_square(small_study: Study) -> None:
    tests = run(small_study, jobs=1, progress=False).tests
    dyads = small_study.dyads
    design = dyads.design(SIZES)
    index = design @ fit_indices(Poisson(dyads.counts), [design]).coefficients[0]
    square = ((index - index.mean()) / index.std()) ** 2
    found = fit_indices(Poisson(dyads.counts), [np.column_stack([design, square])], node_pairs(dyads))
    for name, kind in (("robust", ErrorKind.ROBUST), ("node-clustered", ErrorKind.NODE_CLUSTERED)):
        expected = found.coefficients[0][2] / np.sqrt(found.covariances[kind][2, 2])
        row = chosen(tests, "Poisson", "reset", name)
        assert row["statistic"].item() == pytest.approx(expected, rel=1e-6)


def test_nested_pairs_have_a_likelihood_ratio_and_no_vuong(small_study: Study) -> None:
    study = candidates_of(small_study, NegativeBinomialModel(SIZES), PoissonModel(()))
    results = run(study, jobs=1, progress=False)
    total = results.candidates.set_index("candidate")["log_likelihood"]
    edge = chosen(results.tests, "Poisson", "likelihood_ratio", "negative_binomial 0")
    gap = 2 * (total["negative_binomial 0"] - total["Poisson"])
    assert edge["statistic"].item() == pytest.approx(gap, rel=1e-9)
    assert "half chi-square(0)" in edge["note"].item()
    inside = chosen(results.tests, "Poisson", "likelihood_ratio", "poisson 1; the other in the candidate")
    assert inside["statistic"].item() == pytest.approx(2 * (total["Poisson"] - total["poisson 1"]), rel=1e-9)
    assert "chi-square(1)" in inside["note"].item()
    assert chosen(results.tests, "Poisson", "vuong", "poisson 1").empty
    rivals = chosen(results.tests, "Poisson", "rival_zeros", "poisson 1")
    assert rivals["note"].str.contains("special case").all()


@dataclass(frozen=True)
class Odd(PoissonModel):
    """A Poisson that misbehaves in the way its option says."""

    covariates: tuple[str, ...] = SIZES
    way: str = ""
    measure: ClassVar[Measure | None] = Measure.COUNTS

    def fit(self, dyads, /):
        if self.way == "refuses" or (self.way == "refuses the square" and ADDED in self.covariates):
            raise ModelError("these dyads do not suit me")
        found = super().fit(dyads)
        if self.way == "uncertified":
            return replace(found, convergence=Convergence(False, 1, 1.0, "stopped"))
        return found


def test_what_cannot_be_tested_is_a_row_with_its_reason(small_study: Study) -> None:
    study = candidates_of(
        small_study, *(Odd(way=w) for w in ("refuses", "refuses the square", "uncertified"))
    )
    tests = run(study, jobs=1, progress=False).tests
    other = chosen(tests, "Poisson", "likelihood_ratio", "poisson 0")
    assert "could not be fitted" in other["note"].item()
    assert "these dyads do not suit me" in chosen(tests, "poisson 1", "reset")["note"].item()
    assert chosen(tests, "poisson 1", "park")["statistic"].notna().all()
    for test in ("overdispersion", "reset", "park"):
        assert chosen(tests, "poisson 2", test)["note"].str.contains("not certified").all()
    assert "not certified" in chosen(tests, "Poisson", "vuong", "poisson 2")["note"].item()


def test_pairs_are_resumed_to_the_byte(small_study: Study, tmp_path: Path) -> None:
    """A ledger with all fits but no pairs, as after an interruption between them: the fits are made again."""
    once = run(small_study, jobs=1, progress=False)
    path = tmp_path / "ledger.sqlite"
    covariates = repr(sorted(small_study.covariates.items()))
    with Ledger(path) as book:
        for task in study_tasks(small_study):
            book.keep(task_key(task, small_study.dyads, covariates), execute(task, small_study.dyads))
    resumed = run(small_study, ledger=path, jobs=2, progress=False)
    assert csv_bytes(resumed.tests) == csv_bytes(once.tests)
    with Ledger(path) as book:
        assert len(book.table("tests")) == len(once.tests)


def test_a_column_can_be_added_to_a_view(small_study: Study) -> None:
    dyads = small_study.dyads.select(np.triu(np.ones((small_study.dyads.n_nodes,) * 2, dtype=bool), 1))
    values = np.arange(len(dyads), dtype=float)
    more = dyads.with_column("rank", values)
    np.testing.assert_array_equal(more.column("rank"), values)
    np.testing.assert_array_equal(np.concatenate([b.column("rank") for b in more.blocks(500)]), values)
    assert "rank" not in dyads.covariates
    assert more.digest == dyads.digest
    with pytest.raises(CovariateError, match="exists already"):
        more.with_column("rank", values)
    with pytest.raises(CovariateError, match="finite values"):
        dyads.with_column("other", values[1:])


DEGENERATE = """
title = "degenerate"
seed = 1
[data]
flows = "flows.csv"
nodes = "nodes.csv"
[covariates]
size = { node = "size", end = "origin" }
[[candidates]]
label = "Poisson"
model = "poisson"
covariates = ["size"]
[[candidates]]
label = "Negative binomial"
model = "negative_binomial"
covariates = ["size"]
[[candidates]]
label = "Density, lognormal"
links = { model = "density" }
weights = { model = "lognormal", covariates = ["size"] }
[[candidates]]
label = "Logit, geometric"
links = { model = "logit", covariates = ["size"] }
weights = { model = "geometric", covariates = ["size"] }
"""
ALL = [(o, d) for o in "abcde" for d in "abcde" if o != d]


@pytest.mark.parametrize(
    "flows",
    [
        [("a", "b", 3)],
        [(o, d, 2) for o, d in ALL],
        [(o, d, 10**9 * (1 + n % 3)) for n, (o, d) in enumerate(ALL)],
    ],
    ids=["single link", "all equal", "huge"],
)
def test_degenerate_flows_leave_reasons(tmp_path: Path, flows: list[tuple[str, str, int]]) -> None:
    pd.DataFrame(flows, columns=["origin", "destination", "flow"]).to_csv(tmp_path / "flows.csv", index=False)
    pd.DataFrame({"node": list("abcde"), "size": range(1, 6)}).to_csv(tmp_path / "nodes.csv", index=False)
    tests = run(study_from_text(DEGENERATE, folder=tmp_path), jobs=1, progress=False).tests
    assert len(tests) >= 6  # a row at least for each pair of candidates
    missing = tests["statistic"].isna()
    assert missing.any()
    assert tests.loc[missing, "note"].str.startswith("not computed: ").all()
    assert not tests["note"].str.contains("Error:|Warning:", regex=True).any()
    assert np.isfinite(tests.loc[~missing, "statistic"]).all()
