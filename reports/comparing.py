"""In sample against out of sample, one footing at a time."""

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.reports.frames import CandidateRow, CriterionRow, RunTables
from steelyard.reports.pooling import LOG_SCORE, PooledScore

__all__ = ["Comparison", "Entry", "Swap", "compare"]

NO_FOOTING = "no likelihood footing (mean only)"


@dataclass(frozen=True)
class Entry:
    """One candidate on one footing: its AIC and its pooled out-of-sample log score, where it has them."""

    candidate: str
    family: str
    information: str
    n_parameters: float
    converged: bool | None
    aic: float
    aic_delta: float
    aic_weight: float
    aic_rank: int | None
    held_out: PooledScore | None

    @property
    def held_out_rank(self) -> int | None:
        """Place by the out-of-sample log score; None where it is not scored or not on all folds."""
        return self.held_out.rank if self.held_out else None

    @property
    def is_impossible(self) -> bool:
        """Whether a held-out dyad had probability zero, which makes the log score infinite."""
        return self.held_out is not None and math.isinf(self.held_out.value)


@dataclass(frozen=True)
class Swap:
    """Two candidates that AIC orders one way and the out-of-sample log score the other."""

    ahead_in_sample: str
    ahead_held_out: str


@dataclass(frozen=True)
class Comparison:
    """All candidates on one footing, scored under one validation scheme ("" where nothing was scored)."""

    footing: str
    scheme: str
    entries: tuple[Entry, ...]

    @property
    def ranked_twice(self) -> tuple[Entry, ...]:
        """Entries with a place in sample and out of sample, by the place in sample."""
        both = [
            entry for entry in self.entries if entry.aic_rank is not None and entry.held_out_rank is not None
        ]
        return tuple(sorted(both, key=lambda entry: entry.aic_rank or 0))

    @property
    def n_pairs(self) -> int:
        """Pairs that both rankings could order."""
        return math.comb(len(self.ranked_twice), 2)

    def swaps(self) -> tuple[Swap, ...]:
        """Pairs in opposite order; a tie on either side is no swap."""
        found = []
        for one, two in itertools.combinations(self.ranked_twice, 2):
            if _strictly(one.aic_rank, two.aic_rank) and _strictly(two.held_out_rank, one.held_out_rank):
                found.append(Swap(one.candidate, two.candidate))
        return tuple(found)

    def n_ties(self) -> int:
        """Pairs that share a place on either side, as two infinite log scores do."""
        return sum(
            one.aic_rank == two.aic_rank or one.held_out_rank == two.held_out_rank
            for one, two in itertools.combinations(self.ranked_twice, 2)
        )

    def by_aic(self) -> tuple[Entry, ...]:
        """Entries with an AIC, best first."""
        return tuple(
            sorted(
                (e for e in self.entries if e.aic_rank is not None), key=lambda e: (e.aic_rank, e.candidate)
            )
        )

    def by_held_out(self) -> tuple[Entry, ...]:
        """Entries ranked out of sample, best first; ties (all infinite scores) in the order of AIC."""
        ranked = [entry for entry in self.entries if entry.held_out_rank is not None]
        return tuple(sorted(ranked, key=lambda e: (e.held_out_rank, e.aic_rank or math.inf, e.candidate)))

    def unranked(self) -> tuple[tuple[Entry, str], ...]:
        """Entries without a place out of sample, each with the reason."""
        return tuple(
            (entry, _why_unranked(entry))
            for entry in self.entries
            if self.scheme and entry.held_out_rank is None
        )


def compare(tables: RunTables, pooled: Sequence[PooledScore]) -> tuple[Comparison, ...]:
    """Set AIC beside the out-of-sample log score for every footing and every scheme on it.

    Parameters
    ----------
    tables : the tables of a run
    pooled : its pooled scores

    Returns
    -------
    tuple of comparisons, footings in the order of `criteria`, then of `scores`
    """
    aic = [row for row in tables.criteria if row.criterion == "aic"]
    log_scores = [item for item in pooled if item.score == LOG_SCORE]
    footings = list(dict.fromkeys([row.footing for row in aic] + [item.footing for item in pooled]))
    comparisons = []
    for footing in footings:
        schemes = list(dict.fromkeys(item.scheme for item in pooled if item.footing == footing)) or [""]
        criteria = [row for row in aic if row.footing == footing]
        for scheme in schemes:
            scores = [item for item in log_scores if (item.footing, item.scheme) == (footing, scheme)]
            others = [item.candidate for item in pooled if (item.footing, item.scheme) == (footing, scheme)]
            entries = _entries(tables.candidates, criteria, scores, others)
            comparisons.append(Comparison(footing, scheme, entries))
    return tuple(comparisons)


def _entries(
    candidates: Sequence[CandidateRow],
    criteria: Sequence[CriterionRow],
    scores: Sequence[PooledScore],
    others: Sequence[str],
) -> tuple[Entry, ...]:
    known = {row.candidate: row for row in candidates}
    aic = {row.candidate: row for row in criteria}
    held_out = {item.candidate: item for item in scores}
    present = dict.fromkeys([*aic, *held_out, *others])
    ordered = [name for name in known if name in present] + [name for name in present if name not in known]
    return tuple(_entry(name, known.get(name), aic.get(name), held_out.get(name)) for name in ordered)


def _entry(
    name: str, row: CandidateRow | None, criterion: CriterionRow | None, held_out: PooledScore | None
) -> Entry:
    return Entry(
        candidate=name,
        family=row.family if row else "",
        information=row.information if row else "",
        n_parameters=row.n_parameters if row else math.nan,
        converged=row.converged if row else None,
        aic=criterion.value if criterion else math.nan,
        aic_delta=criterion.delta if criterion else math.nan,
        aic_weight=criterion.weight if criterion else math.nan,
        aic_rank=criterion.rank if criterion else None,
        held_out=held_out,
    )


def _strictly(one: int | None, two: int | None) -> bool:
    return one is not None and two is not None and one < two


def _why_unranked(entry: Entry) -> str:
    if entry.held_out is None:
        return "no log score"
    if not entry.held_out.complete:
        held_out = entry.held_out
        if held_out.n_folds == held_out.n_folds_expected:
            return "other dyads in its folds"
        return f"{held_out.n_folds} of {held_out.n_folds_expected} folds"
    return "no value"
