"""Small hand-made runs, and runs of any size, as tidy tables."""

import math
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from steelyard.reports import FootingSheet, MethodSheet, ReportFacts, ReportFormat, write_reports

Tables = dict[str, pd.DataFrame]

COUNTS = "counts · unit 1 · dyads 5f1c2a90"
AMOUNTS = "amounts · unit 1 · dyads 5f1c2a90"
_CANDIDATES = (
    "candidate family links weights information measure footing n_nodes n_dyads n_links n_parameters "
    "log_likelihood log_likelihood_links log_likelihood_weights converged iterations residual message"
)
_CRITERIA = "footing candidate criterion value delta weight rank"
_ESTIMATES = "candidate part term estimate se_kind se z p_value lower upper"
_SCORES = "footing candidate scheme repeat fold score better value n_dyads n_impossible"
_OUTCOMES = "candidate scheme repeat fold outcome reason"


def frame(columns: str, rows: list[tuple[object, ...]]) -> pd.DataFrame:
    return pd.DataFrame(rows, columns=columns.split())


def candidate_row(name: str, family: str = "econometric", footing: str = COUNTS) -> tuple[object, ...]:
    parts = (None, "poisson", "covariates", footing.split()[0], footing)
    return (name, family, *parts, 4, 12, 6, 3, -50.0, None, None, True, 5, 1e-12, "")


@pytest.fixture
def empty_tables() -> Tables:
    return {
        "candidates": frame(_CANDIDATES, []),
        "criteria": frame(_CRITERIA, []),
        "estimates": frame(_ESTIMATES, []),
        "scores": frame(_SCORES, []),
        "outcomes": frame(_OUTCOMES, []),
    }


def make_three_tables() -> Tables:
    """Alder, Birch and Cedar on counts, and Cedar on amounts too.

    AIC orders Alder, Birch, Cedar. Held out (folds of 8 and 4 dyads): Alder (8 * 2 + 4 * 3.5) / 12 = 2.5,
    Birch (8 * 1 + 4 * 4) / 12 = 2, Cedar infinite. So Alder and Birch swap.
    """
    names = ["Alder", "Birch", "Cedar"]
    log_scores = {"Alder": (2.0, 3.5), "Birch": (1.0, 4.0), "Cedar": (1.5, math.inf)}
    scores = []
    for name, values in log_scores.items():
        for fold, (value, size) in enumerate(zip(values, (8, 4), strict=True)):
            key = (COUNTS, name, "dyads", 0, fold)
            scores.append((*key, "log_score", "lower", value, size, int(math.isinf(value))))
            scores.append((*key, "brier", "lower", 0.1 + 0.1 * fold, size, 0))
            scores.append((*key, "rmse", "lower", (1.0, 4.0)[fold], size, 0))
    scores.append((AMOUNTS, "Cedar", "dyads", 0, 0, "log_score", "lower", 5.0, 12, 0))
    criteria = [
        (COUNTS, name, "aic", 100.0 + 10 * place, 10.0 * place, (0.993, 0.0067, 0.00005)[place], place + 1)
        for place, name in enumerate(names)
    ]
    criteria.append((AMOUNTS, "Cedar", "aic", 180.0, 0.0, 1.0, 1))
    rows = [candidate_row("Alder"), candidate_row("Birch", "maximum-entropy")]
    rows.append(candidate_row("Cedar", "maximum-entropy", AMOUNTS))
    estimates = [
        ("Alder", "joint", "distance", -1.25, "model", 0.25, -5.0, 5.7e-7, -1.74, -0.76),
        ("Alder", "joint", "distance", -1.25, "robust", 0.5, -2.5, 0.0124, -2.23, -0.27),
        ("Birch", "links", "node:Quay (out)", 0.5, None, None, None, None, None, None),
        ("Birch", "links", "node:Reef (out)", -math.inf, None, None, None, None, None, None),
    ]
    outcomes = [
        ("Alder", "dyads", 0, 0, "scored", ""),
        ("Birch", "nodes", 0, 0, "not_applicable", "cannot score unseen nodes"),
    ]
    return {
        "candidates": frame(_CANDIDATES, rows),
        "criteria": frame(_CRITERIA, criteria),
        "estimates": frame(_ESTIMATES, estimates),
        "scores": frame(_SCORES, scores),
        "outcomes": frame(_OUTCOMES, outcomes),
    }


@pytest.fixture
def three_tables() -> Tables:
    return make_three_tables()


@pytest.fixture(scope="session")
def base_tables() -> Tables:
    """The three candidates; read them only."""
    return make_three_tables()


@pytest.fixture(scope="session")
def base_facts() -> ReportFacts:
    return make_facts()


@pytest.fixture(scope="session")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with every report of the three candidates; read it only."""
    folder = tmp_path_factory.mktemp("written")
    write_reports(folder, make_three_tables(), make_facts(), frozenset(ReportFormat))
    return folder


@pytest.fixture
def many_tables(empty_tables: Tables) -> Callable[[int], Tables]:
    """Runs of n candidates in which the held-out order is the AIC order with neighbours exchanged."""

    def make(number: int) -> Tables:
        names = [f"Candidate {index:02d}, degrees and geometric weights" for index in range(number)]
        criteria = [
            (COUNTS, name, "aic", 100.0 + index, float(index), 0.1, index + 1)
            for index, name in enumerate(names)
        ]
        scores = [
            (COUNTS, name, "dyads", 0, fold, "log_score", "lower", 2 + 0.1 * (index ^ 1) + 0.01 * fold, 6, 0)
            for index, name in enumerate(names)
            for fold in range(2)
        ]
        families = ("econometric", "maximum-entropy", "mixed")
        rows = [candidate_row(name, families[index % 3]) for index, name in enumerate(names)]
        return empty_tables | {
            "candidates": frame(_CANDIDATES, rows),
            "criteria": frame(_CRITERIA, criteria),
            "scores": frame(_SCORES, scores),
        }

    return make


def make_facts() -> ReportFacts:
    return ReportFacts(
        title="Freight between island ports",
        data=(("Data", "islands"),),
        methods=(
            MethodSheet(
                "poisson", "econometric", "Counts.", "P(w)", "covariates", "https://doi.org/10.1/x", "None."
            ),
        ),
        provenance=(("data digest", "5f1c2a90"),),
        notes=("Invented.",),
        footings=(
            FootingSheet(COUNTS, "Whole flows (links and weights), as counts", "For whole flows."),
            FootingSheet(AMOUNTS, "Whole flows (links and weights), as amounts", "For whole flows."),
        ),
    )


@pytest.fixture
def facts() -> ReportFacts:
    return make_facts()
