"""Pairs of candidates: the tests that need two full fits, done once both are there and kept in the ledger."""

from __future__ import annotations

import hashlib
import time
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass
from itertools import combinations
from typing import Any

import numpy as np

from steelyard.benchmark.ledger import Ledger
from steelyard.benchmark.specification.finding import Finding, not_computed
from steelyard.benchmark.specification.pair_means import mean_findings
from steelyard.benchmark.specification.pairs import Side, pair_findings
from steelyard.benchmark.tasks import Outcome, Task, TaskResult
from steelyard.datasets import Dyads

__all__ = ["StudyPairs"]

Pair = tuple[int, int]


@dataclass(frozen=True, eq=False)
class StudyPairs:
    """Every pair of candidates of a study, in its order.

    Attributes
    ----------
    full : for each candidate its full fit, with the key of that task
    keys : pair of positions -> key of the pair in the ledger
    results : by key; what the ledger held, to which a run adds
    """

    full: Sequence[tuple[Task, str]]
    keys: Mapping[Pair, str]
    results: dict[str, TaskResult]

    @classmethod
    def of(cls, tasks: Sequence[Task], keys: Sequence[str], book: Ledger) -> StudyPairs:
        """The pairs, and what the ledger holds of them."""
        full = [(task, key) for task, key in zip(tasks, keys, strict=True) if task.fold is None]
        pairs = {(i, j): _pair_key(full[i][1], full[j][1]) for i, j in combinations(range(len(full)), 2)}
        kept = {key: found for key in pairs.values() if (found := book.result(key)) is not None}
        return cls(full, pairs, kept)

    @property
    def missing(self) -> list[Pair]:
        """Pairs without a result."""
        return [pair for pair, key in self.keys.items() if key not in self.results]

    @property
    def needs(self) -> frozenset[str]:
        """Keys of the full fits that missing pairs are made of: their arrays are kept nowhere."""
        return frozenset(self.full[position][1] for pair in self.missing for position in pair)

    def done(self, fits: Mapping[str, TaskResult], dyads: Dyads) -> Iterator[tuple[str, TaskResult]]:
        """Test the missing pairs; a candidate that was not fitted leaves a row that says so."""
        missing = self.missing
        sides = {
            position: _side(self.full[position][0], fits[self.full[position][1]])
            for position in sorted({p for pair in missing for p in pair})
        }
        started = time.perf_counter()
        means, failures = _means(missing, sides, dyads)
        for pair in missing:
            rows, sound = _rows(pair, sides, means, dyads)
            lasting = sound and not failures and all(fits[self.full[p][1]].lasting for p in pair)
            seconds = time.perf_counter() - started
            yield self.keys[pair], TaskResult(Outcome("scored", ""), {"tests": rows}, seconds, lasting)
            started = time.perf_counter()

    def by_labels(self) -> dict[tuple[str, str], TaskResult]:
        """Results by the labels of the two candidates."""
        labels = [task.candidate.label for task, _ in self.full]
        return {(labels[i], labels[j]): self.results[key] for (i, j), key in self.keys.items()}


def _pair_key(first: str, second: str) -> str:
    return hashlib.sha256(f"pair {first} {second}".encode()).hexdigest()


def _side(task: Task, result: TaskResult) -> Side | None:
    return None if result.evaluated is None else Side(task.candidate.model, result.evaluated)


Means = Mapping[Pair, tuple[Finding, ...]]


def _means(missing: Sequence[Pair], sides: Mapping[int, Side | None], dyads: Dyads) -> tuple[Means, int]:
    """The rival-means test, (candidate, rival) -> rows, each candidate's derivatives taken once."""
    found: dict[Pair, tuple[Finding, ...]] = {}
    failures = 0
    for position, side in sides.items():
        others = [q for pair in missing if position in pair for q in pair if q != position]
        rivals = {q: rival for q in others if (rival := sides[q]) is not None}
        if side is None or not rivals:
            continue
        try:
            with np.errstate(over="ignore", invalid="ignore"):
                done = mean_findings(side, rivals, dyads)
        except Exception as error:  # noqa: BLE001 - whatever goes wrong becomes a row, and is tried again
            failures += 1
            done = {q: (not_computed("", f"{type(error).__name__}: {error}"),) for q in rivals}
        found.update({(position, q): rows for q, rows in done.items()})
    return found, failures


def _rows(
    pair: Pair, sides: Mapping[int, Side | None], means: Means, dyads: Dyads
) -> tuple[list[dict[str, Any]], bool]:
    """Rows of one pair, `side` saying whose they are, and whether nothing unforeseen happened."""
    first, second = sides[pair[0]], sides[pair[1]]
    sound = True
    if first is None or second is None:
        who = [name for name, side in (("the candidate", first), ("the other", second)) if side is None]
        found = [("likelihood_ratio", not_computed("", f"{' and '.join(who)} could not be fitted"))]
    else:
        try:
            found = list(pair_findings(first, second, dyads))
        except Exception as error:  # noqa: BLE001 - whatever goes wrong becomes a row, and is tried again
            sound = False
            found = [("vuong", not_computed("", f"{type(error).__name__}: {error}"))]
    rows = [{"side": 0, "test": test, **asdict(finding)} for test, finding in found]
    for side, key in enumerate((pair, pair[::-1])):
        rows += [{"side": side, "test": "rival_zeros", **asdict(f)} for f in means.get(key, ())]
    return rows, sound
