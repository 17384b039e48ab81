"""The directory of a run: what may be written where, and nothing written over that is not ours."""

from __future__ import annotations

import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from steelyard.benchmark.errors import StudyError
from steelyard.benchmark.facts import software_versions
from steelyard.benchmark.ledger import Ledger
from steelyard.benchmark.results import Results, facts_from_json
from steelyard.benchmark.study import Study
from steelyard.reports import ReportFormat
from steelyard.reports.writing import write_atomically

__all__ = ["RunDirectory"]

LEDGER = "ledger.sqlite"


@dataclass(frozen=True)
class RunDirectory:
    """A directory that holds, or will hold, one run."""

    path: Path

    @property
    def ledger(self) -> Path:
        """The file that keeps finished tasks."""
        return self.path / LEDGER

    def prepare(self, *, fresh: bool) -> None:
        """Make the directory, or check that what it holds is a run; `fresh` forgets finished tasks.

        Raises
        ------
        StudyError : it is a file, cannot be made, or holds files that are not a run
        """
        if self.path.exists() and not self.path.is_dir():
            raise StudyError(f"{self.path} is a file; give a directory with -o")
        try:
            self.path.mkdir(parents=True, exist_ok=True)
            strangers = not self.ledger.exists() and any(self.path.iterdir())
        except OSError as error:
            raise StudyError(f"{self.path} cannot be made or read: {error.strerror or error}") from error
        if strangers:
            raise StudyError(
                f"{self.path} holds files but no {LEDGER}, so it is not a run of ours; choose an empty or a new "
                "directory with -o"
            )
        if fresh and self.ledger.exists():
            self.ledger.unlink()

    def keep_study(self, study: Study) -> None:
        """Write the study file as it was run."""
        _write(self.path / "study.toml", study.text)

    def keep_provenance(self, study: Study, results: Results, started: str, finished: str) -> None:
        """Write provenance.json: the only output that differs between two runs of one study."""
        names = ("candidate", "scheme", "repeat", "fold", "seconds")
        found = study.network.provenance
        about: dict[str, Any] = {
            "title": study.title,
            "seed": study.seed,
            "data": {
                "source": found.source,
                "licence": found.licence,
                "steps": list(found.steps),
                "digest": study.network.digest,
            },
            "versions": software_versions(),
            "started": started,
            "finished": finished,
            "tasks": [dict(zip(names, row, strict=True)) for row in results.seconds],
        }
        _write(self.path / "provenance.json", json.dumps(about, indent=1) + "\n")

    def results(self) -> Results:
        """The results of a finished run.

        Raises
        ------
        StudyError : there is no finished run here
        """
        if not self.ledger.exists():
            raise StudyError(f"{self.path} holds no {LEDGER}; give the directory of a run")
        with Ledger(self.ledger) as book:
            facts, formats = book.about("facts"), book.about("formats")
            if facts is None or formats is None:
                raise StudyError(f"the run in {self.path} is not finished; finish it with steelyard run")
            names = ("candidates", "criteria", "estimates", "scores", "tests", "outcomes")
            tables = {name: book.table(name) for name in names}
        tables["candidates"]["converged"] = tables["candidates"]["converged"].astype(bool)
        return Results(tables, facts_from_json(facts), frozenset(ReportFormat(f) for f in formats.split()))


def _write(path: Path, text: str) -> None:
    try:
        write_atomically(path, text.encode())
    except OSError as error:
        raise StudyError(
            f"{path} cannot be written: {error.strerror or error}; nothing was changed"
        ) from error
