"""In sample against out of sample, one footing at a time, by the score that fits the footing."""

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.reports.facts import FootingSheet, ReportFacts
from steelyard.reports.frames import CandidateRow, CriterionRow, RunTables
from steelyard.reports.pooling import LOG_SCORE, RMSE, PooledScore

__all__ = ["Comparison", "Entry", "Standing", "Swap", "compare"]


@dataclass(frozen=True)
class Entry:
    """One candidate on one footing: its AIC and its pooled out-of-sample score, where it has them."""

    candidate: str
    family: str
    links: str
    weights: str
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
        """Place by the out-of-sample score; None where it is not scored or not on all folds."""
        return self.held_out.rank if self.held_out else None

    @property
    def is_impossible(self) -> bool:
        """Whether the score is infinite, as a log score is when a held-out dyad had probability zero."""
        return self.held_out is not None and math.isinf(self.held_out.value)


@dataclass(frozen=True)
class Swap:
    """Two candidates that AIC orders one way and the out-of-sample score the other."""

    ahead_in_sample: str
    ahead_held_out: str


@dataclass(frozen=True)
class Standing:
    """Candidates that share a place, and the part of their law that makes them ("" where none does)."""

    rank: int
    entries: tuple[Entry, ...]
    shared: str

    @property
    def names(self) -> tuple[str, ...]:
        """The candidates' labels."""
        return tuple(entry.candidate for entry in self.entries)


@dataclass(frozen=True)
class Comparison:
    """All candidates on one footing, scored under one validation scheme ("" where nothing was scored).

    `score` is the score that ranks them out of sample: the log score where any of them has one.
    """

    sheet: FootingSheet
    scheme: str
    score: str
    entries: tuple[Entry, ...]

    @property
    def footing(self) -> str:
        """The footing as tables write it."""
        return self.sheet.text

    @property
    def has_criteria(self) -> bool:
        """Whether any candidate has an AIC here."""
        return any(entry.aic_rank is not None for entry in self.entries)

    @property
    def is_alone(self) -> bool:
        """Whether there is a single candidate, so that nothing can be ranked."""
        return len(self.entries) == 1

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
        """Entries with an AIC, best first; ties in the order of the study."""
        ranked = [entry for entry in self.entries if entry.aic_rank is not None]
        return tuple(sorted(ranked, key=lambda entry: entry.aic_rank or 0))

    def by_held_out(self) -> tuple[Entry, ...]:
        """Entries ranked out of sample, best first; ties (all infinite scores) by AIC, then as in the study."""
        ranked = [entry for entry in self.entries if entry.held_out_rank is not None]
        return tuple(sorted(ranked, key=lambda entry: (entry.held_out_rank, entry.aic_rank or math.inf)))

    def in_sample(self) -> tuple[Standing, ...]:
        """Places by AIC, best first."""
        return _standings([(entry.aic_rank, entry) for entry in self.by_aic()])

    def held_out(self) -> tuple[Standing, ...]:
        """Places out of sample, best first."""
        return _standings([(entry.held_out_rank, entry) for entry in self.by_held_out()])

    def unranked(self) -> tuple[tuple[Entry, str], ...]:
        """Entries without a place out of sample, each with the reason."""
        return tuple(
            (entry, _why_unranked(entry, self.score))
            for entry in self.entries
            if self.scheme and entry.held_out_rank is None
        )


def compare(tables: RunTables, pooled: Sequence[PooledScore], facts: ReportFacts) -> tuple[Comparison, ...]:
    """Set AIC beside the out-of-sample score for every footing and every scheme on it.

    Parameters
    ----------
    tables : the tables of a run
    pooled : its pooled scores
    facts : names the footings and orders them

    Returns
    -------
    tuple of comparisons: footings in reading order, those that no sheet names in the order of the tables
    """
    aic = [row for row in tables.criteria if row.criterion == "aic"]
    footings = list(dict.fromkeys([row.footing for row in aic] + [item.footing for item in pooled]))
    comparisons = []
    for footing in sorted(footings, key=facts.footing_place):
        schemes = list(dict.fromkeys(item.scheme for item in pooled if item.footing == footing)) or [""]
        criteria = [row for row in aic if row.footing == footing]
        for scheme in schemes:
            scores = [item for item in pooled if (item.footing, item.scheme) == (footing, scheme)]
            score = _deciding_score(scores)
            entries = _entries(tables.candidates, criteria, scores, score)
            comparisons.append(Comparison(facts.footing(footing), scheme, score, entries))
    return tuple(comparisons)


def _deciding_score(scores: Sequence[PooledScore]) -> str:
    """The log score where there is one, else RMSE, else whatever came first."""
    present = list(dict.fromkeys(item.score for item in scores))
    return next((score for score in (LOG_SCORE, RMSE, *present) if score in present), LOG_SCORE)


def _entries(
    candidates: Sequence[CandidateRow],
    criteria: Sequence[CriterionRow],
    scores: Sequence[PooledScore],
    score: str,
) -> tuple[Entry, ...]:
    known = {row.candidate: row for row in candidates}
    aic = {row.candidate: row for row in criteria}
    held_out = {item.candidate: item for item in scores if item.score == score}
    present = dict.fromkeys([*aic, *(item.candidate for item in scores)])
    ordered = [name for name in known if name in present] + [name for name in present if name not in known]
    return tuple(_entry(name, known.get(name), aic.get(name), held_out.get(name)) for name in ordered)


def _entry(
    name: str, row: CandidateRow | None, criterion: CriterionRow | None, held_out: PooledScore | None
) -> Entry:
    return Entry(
        candidate=name,
        family=row.family if row else "",
        links=row.links if row else "",
        weights=row.weights if row else "",
        information=row.information if row else "",
        n_parameters=row.n_parameters if row else math.nan,
        converged=row.converged if row else None,
        aic=criterion.value if criterion else math.nan,
        aic_delta=criterion.delta if criterion else math.nan,
        aic_weight=criterion.weight if criterion else math.nan,
        aic_rank=criterion.rank if criterion else None,
        held_out=held_out,
    )


def _standings(ranked: Sequence[tuple[int | None, Entry]]) -> tuple[Standing, ...]:
    groups: dict[int, list[Entry]] = {}
    for rank, entry in ranked:
        groups.setdefault(rank or 0, []).append(entry)
    return tuple(Standing(rank, tuple(group), _shared_part(group)) for rank, group in groups.items())


def _shared_part(entries: Sequence[Entry]) -> str:
    """The one part that tied candidates have in common, if it is one part."""
    links = {entry.links for entry in entries}
    weights = {entry.weights for entry in entries}
    if len(entries) > 1 and len(links) > 1 and len(weights) == 1 and weights != {""}:
        return "weights law"
    if len(entries) > 1 and len(weights) > 1 and len(links) == 1 and links != {""}:
        return "links law"
    return ""


def _strictly(one: int | None, two: int | None) -> bool:
    return one is not None and two is not None and one < two


def _why_unranked(entry: Entry, score: str) -> str:
    if entry.held_out is None:
        return f"no {score.replace('_', ' ')}"
    if not entry.held_out.complete:
        held_out = entry.held_out
        if held_out.n_folds == held_out.n_folds_expected:
            return "other dyads in its folds"
        return f"{held_out.n_folds} of {held_out.n_folds_expected} folds"
    return "no value"
