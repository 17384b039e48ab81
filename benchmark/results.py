"""Results: the tidy tables as DataFrames, and how to write them out."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

from steelyard.reports import (
    FootingSheet,
    MethodSheet,
    ReportFacts,
    ReportFormat,
    terminal_summary,
    write_reports,
)

__all__ = ["Results", "facts_from_json", "facts_to_json"]


@dataclass(frozen=True, eq=False)
class Results:
    """What a run found.

    Attributes
    ----------
    tables : tidy tables by name; the properties below are the same tables
    facts : what reports say besides
    formats : what `report` writes unless told otherwise
    seconds : (candidate, scheme, repeat, fold) -> time of each task, in the order of the study
    """

    tables: Mapping[str, Any]
    facts: ReportFacts
    formats: frozenset[ReportFormat]
    seconds: tuple[tuple[str, str, int, int, float], ...] = ()

    @property
    def candidates(self) -> Any:
        """One row a candidate: what was fitted, its log-likelihoods, its certificate."""
        return self.tables["candidates"]

    @property
    def criteria(self) -> Any:
        """Information criteria, ranked within each footing."""
        return self.tables["criteria"]

    @property
    def estimates(self) -> Any:
        """Parameters with standard errors by kind."""
        return self.tables["estimates"]

    @property
    def scores(self) -> Any:
        """Out-of-sample scores of each fold."""
        return self.tables["scores"]

    @property
    def tests(self) -> Any:
        """Tests of specification on the fits to all dyads."""
        return self.tables["tests"]

    @property
    def outcomes(self) -> Any:
        """How each task ended."""
        return self.tables["outcomes"]

    @property
    def n_failed(self) -> int:
        """How many candidates have a task that failed, or a fit to all dyads that is not certified."""
        failed = set(self.outcomes.loc[self.outcomes["outcome"] == "failed", "candidate"])
        unsure = set(self.candidates.loc[~self.candidates["converged"].astype(bool), "candidate"])
        return len(failed | unsure)

    def report(
        self, directory: str | Path, formats: frozenset[ReportFormat] | None = None
    ) -> tuple[Path, ...]:
        """Write the reports; returns what was written."""
        return write_reports(Path(directory), self.tables, self.facts, formats or self.formats)

    def summary(self) -> str:
        """About ten lines for a terminal, the verdict first."""
        return terminal_summary(self.tables, self.facts)


def facts_to_json(facts: ReportFacts) -> str:
    """Facts as text for the ledger."""
    return json.dumps(asdict(facts))


def facts_from_json(text: str) -> ReportFacts:
    """The facts that `facts_to_json` wrote."""
    raw = json.loads(text)
    return ReportFacts(
        title=raw["title"],
        data=tuple((k, v) for k, v in raw["data"]),
        methods=tuple(MethodSheet(**sheet) for sheet in raw["methods"]),
        provenance=tuple((k, v) for k, v in raw["provenance"]),
        notes=tuple(raw["notes"]),
        footings=tuple(FootingSheet(**sheet) for sheet in raw.get("footings", [])),
    )
