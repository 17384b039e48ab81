"""The engine: does the tasks of a study that the ledger does not hold yet, and brings the tables together."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import nullcontext
from pathlib import Path
from typing import Any

from joblib import Parallel, cpu_count, delayed, parallel_config
from threadpoolctl import threadpool_limits
from tqdm import tqdm

from steelyard.benchmark.assembly import assemble
from steelyard.benchmark.errors import StudyError
from steelyard.benchmark.facts import report_facts
from steelyard.benchmark.footing import Footing, Scope
from steelyard.benchmark.ledger import Ledger
from steelyard.benchmark.pairing import StudyPairs
from steelyard.benchmark.results import Results, facts_to_json
from steelyard.benchmark.study import Study
from steelyard.benchmark.tasks import Task, TaskResult, execute, task_key
from steelyard.datasets import Dyads
from steelyard.models import Measure

__all__ = ["run", "study_tasks"]


def study_tasks(study: Study) -> tuple[Task, ...]:
    """Every task of a study, in the order of its file: for each candidate the full fit, then each fold."""
    return tuple(
        Task(candidate, fold)
        for candidate in study.candidates
        for fold in (None, *(fold for scheme in study.validation for fold in scheme))
    )


def run(
    study: Study, *, ledger: Path | None = None, jobs: int | None = None, progress: bool | None = None
) -> Results:
    """Fit and score every candidate of a study.

    Parameters
    ----------
    study : from `load_study`
    ledger : the SQLite file that keeps finished tasks and from which a run goes on; None keeps nothing
    jobs : how many processes; None takes one for each core
    progress : whether to show a progress bar on standard error; None shows it on a terminal only

    Returns
    -------
    Results, the same for any number of jobs and whether or not the run was interrupted.

    Raises
    ------
    StudyError : the ledger cannot be used, or `jobs` is below 1
    """
    if jobs is not None and jobs < 1:
        raise StudyError(f"jobs must be at least 1; got {jobs}")
    tasks = study_tasks(study)
    facts = report_facts(study)
    # One inner thread, in this process as in the workers: the linear algebra here is small, and how a sum is split
    # between threads would show in the last digits.
    with threadpool_limits(limits=1), Ledger(ledger or Path(":memory:")) as book:
        covariates = repr(sorted(study.covariates.items()))
        keys = [task_key(task, study.dyads, covariates) for task in tasks]
        pairs = StudyPairs.of(tasks, keys, book)
        results = {key: found for key in keys if (found := book.result(key)) is not None}
        missing = [
            (key, task)
            for key, task in zip(keys, tasks, strict=True)
            if key not in results or (results[key].payload and task.fold is None and key in pairs.needs)
        ]
        with _bar(len(tasks) + len(pairs.keys), len(missing) + len(pairs.missing), progress) as bar:
            for key, result in _done(missing, study.dyads, jobs or cpu_count(), bar):
                book.keep(key, result)
                results[key] = result
            for key, result in pairs.done(results, study.dyads):
                book.keep(key, result)
                bar.update()
                pairs.results[key] = result
        finished = [(task, results[key]) for key, task in zip(keys, tasks, strict=True)]
        tables = assemble(finished, pairs.by_labels(), _footings(study.dyads))
        book.keep_tables(tables)
        book.note("facts", facts_to_json(facts))
        book.note("formats", " ".join(sorted(f.value for f in study.formats)))
    seconds = tuple(
        (t.candidate.label, t.scheme, t.fold.repeat if t.fold else 0, t.fold.fold if t.fold else 0, r.seconds)
        for t, r in finished
    )
    return Results(tables, facts, study.formats, seconds)


def _footings(dyads: Dyads) -> dict[str, Footing]:
    """Every footing that laws can stand on here, by its text."""
    found = [Footing.of(dyads, measure, scope) for measure in (*Measure, None) for scope in Scope]
    return {footing.text: footing for footing in found}


def _bar(total: int, left: int, progress: bool | None) -> Any:
    """A progress bar over fits, folds and pairs of candidates."""
    return tqdm(
        total=total,
        initial=total - left,
        unit="task",
        desc="fitting",
        disable=None if progress is None else not progress,
    )


def _done(
    missing: Sequence[tuple[str, Task]], dyads: Dyads, jobs: int, bar: Any
) -> Iterator[tuple[str, TaskResult]]:
    """Do the missing tasks, yielding each as it is finished."""
    workers = min(jobs, len(missing))
    setting = parallel_config("loky", inner_max_num_threads=1) if workers > 1 else nullcontext()
    with setting:
        pool = Parallel(n_jobs=max(workers, 1), return_as="generator_unordered")
        for key, label, result in pool(delayed(_keyed)(key, task, dyads) for key, task in missing):
            bar.set_postfix_str(label, refresh=False)
            bar.update()
            yield key, result


def _keyed(key: str, task: Task, dyads: Dyads) -> tuple[str, str, TaskResult]:
    return key, task.candidate.label, execute(task, dyads)
