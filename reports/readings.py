"""Reading tables: what a person looks at, made from rows, pooled scores and comparisons."""

import math
from collections import Counter
from collections.abc import Sequence

from steelyard.reports.comparing import Comparison, Entry
from steelyard.reports.frames import CandidateRow, CriterionRow, OutcomeRow
from steelyard.reports.pooling import LOG_SCORE, PooledScore
from steelyard.reports.tables import Cell, CellKind, Column, Missing, Table
from steelyard.reports.wording import count, footing_title, held_out_phrase, listing, score_title

__all__ = ["candidate_table", "criteria_table", "ranking_table", "score_table", "warning_table"]

_CANDIDATE = Column("candidate", "Candidate", CellKind.TEXT)
_OUTCOMES = {"failed": "failed", "not_applicable": "not applicable"}
_CRITERIA = ("aic", "aicc", "bic", "hqic")
_CRITERION_TITLES = ("AIC", "AICc", "BIC", "HQIC")


def candidate_table(candidates: Sequence[CandidateRow]) -> Table:
    """What was fitted; no likelihoods, because the rows stand on different footings."""
    columns = (
        _CANDIDATE,
        Column("family", "Family", CellKind.TEXT),
        Column("links", "Links", CellKind.TEXT),
        Column("weights", "Weights", CellKind.TEXT),
        Column("information", "Is told", CellKind.TEXT),
        Column("n_parameters", "Parameters", CellKind.SIGNIFICANT, 4),
        Column("converged", "Converged", CellKind.YES_NO),
        Column("residual", "Residual", CellKind.SIGNIFICANT, 2),
        Column("footing", "Own footing", CellKind.TEXT),
    )
    rows = tuple(
        (
            row.candidate,
            row.family or None,
            _words(row.links),
            _words(row.weights),
            row.information or None,
            _whole(row.n_parameters),
            row.converged,
            row.residual,
            footing_title(row.footing),
        )
        for row in candidates
    )
    notes = (
        "Is told: what a candidate knows of the data besides its covariates; candidates that know more can "
        "be expected to fit better.",
        "Residual: norm of the gradient, or the worst violated constraint, relative to its scale.",
    )
    return Table("candidates", "Candidates as fitted to all dyads", columns, rows, notes)


_IN_SAMPLE = (
    _CANDIDATE,
    Column("family", "Family", CellKind.TEXT),
    Column("information", "Is told", CellKind.TEXT),
    Column("n_parameters", "Parameters", CellKind.SIGNIFICANT, 4),
    Column("aic", "AIC", CellKind.DECIMAL, 1),
    Column("aic_delta", "AIC above the best", CellKind.DECIMAL, 1),
    Column("aic_rank", "Place by AIC", CellKind.INTEGER),
)
_HELD_OUT = (
    Column("log_score", "Log score, out of sample", CellKind.DECIMAL, 4),
    Column("lowest", "Lowest fold", CellKind.DECIMAL, 4),
    Column("highest", "Highest fold", CellKind.DECIMAL, 4),
    Column("n_impossible", "Impossible dyads", CellKind.INTEGER),
    Column("held_out_rank", "Place by log score", CellKind.INTEGER),
)


def ranking_table(comparison: Comparison, key: str) -> Table:
    """In sample and out of sample side by side, on one footing under one scheme, best by AIC first.

    Where nothing was scored, the in-sample half alone.
    """
    reasons = {entry.candidate: reason for entry, reason in comparison.unranked()}
    ordered = [*comparison.by_aic(), *(entry for entry in comparison.entries if entry.aic_rank is None)]
    uncertified = [entry.candidate for entry in ordered if entry.converged is False]
    doubt = (f"Fit not certified, so its numbers may move: {listing(uncertified)}.",) if uncertified else ()
    name = f"ranking-{key}"
    if not comparison.scheme:
        rows = tuple(_in_sample_cells(entry) for entry in ordered)
        return Table(name, f"In sample: {footing_title(comparison.footing)}", _IN_SAMPLE, rows, doubt)
    held_out = held_out_phrase(comparison.scheme)
    rows = tuple(
        _in_sample_cells(entry) + _held_out_cells(entry, reasons.get(entry.candidate, ""))
        for entry in ordered
    )
    notes = (
        f"Log score: mean negative log density over {held_out}, in nats per dyad; lower is better.",
        "Lowest and highest fold are a range of folds, not a standard error.",
        "An impossible dyad is a held-out observation to which the candidate gives no probability; "
        "one makes the log score infinite.",
    )
    caption = f"In sample and out of sample: {footing_title(comparison.footing)}, {held_out}"
    return Table(name, caption, _IN_SAMPLE + _HELD_OUT, rows, doubt + notes)


def _in_sample_cells(entry: Entry) -> tuple[Cell, ...]:
    who = (entry.candidate, entry.family or None, entry.information or None, _whole(entry.n_parameters))
    return (*who, entry.aic, entry.aic_delta, entry.aic_rank)


def _held_out_cells(entry: Entry, reason: str) -> tuple[Cell, ...]:
    score = entry.held_out
    place = Missing(reason) if entry.held_out_rank is None else entry.held_out_rank
    if score is None:
        return (None, None, None, None, place)
    return (score.value, score.lowest, score.highest, score.n_impossible, place)


def score_table(comparison: Comparison, pooled: Sequence[PooledScore], key: str) -> Table | None:
    """All other scores of one comparison, pooled over folds; None where there are none."""
    chosen = [
        item
        for item in pooled
        if (item.footing, item.scheme) == (comparison.footing, comparison.scheme) and item.score != LOG_SCORE
    ]
    if not chosen:
        return None
    names = list(dict.fromkeys(item.score for item in chosen))
    chosen.sort(key=lambda item: (names.index(item.score), item.rank or math.inf))
    columns = [_CANDIDATE]
    for name in names:
        columns += [
            Column(f"{name}_value", _sentence_case(score_title(name, unit=False)), CellKind.SIGNIFICANT, 4),
            Column(f"{name}_lowest", "Lowest fold", CellKind.SIGNIFICANT, 4),
            Column(f"{name}_highest", "Highest fold", CellKind.SIGNIFICANT, 4),
            Column(f"{name}_rank", "Place", CellKind.INTEGER),
        ]
    by_key = {(item.candidate, item.score): item for item in chosen}
    rows = []
    for candidate in dict.fromkeys(item.candidate for item in chosen):
        cells: list[Cell] = [candidate]
        for name in names:
            cells += _score_cells(by_key.get((candidate, name)))
        rows.append(tuple(cells))
    better = {item.score: item.better for item in chosen}
    units = "; ".join(f"{_sentence_case(score_title(name))}, {better[name]} is better" for name in names)
    notes = (
        f"{units}.",
        "RMSE pools over folds as the root of the mean square over dyads, others as a mean over dyads.",
    )
    caption = f"Other scores on {held_out_phrase(comparison.scheme)}: {footing_title(comparison.footing)}"
    return Table(f"scores-{key}", caption, tuple(columns), tuple(rows), notes)


def _score_cells(item: PooledScore | None) -> list[Cell]:
    if item is None:
        return [None] * 4
    lacking = Missing(f"{item.n_folds} of {item.n_folds_expected} folds")
    return [item.value, item.lowest, item.highest, lacking if item.rank is None else item.rank]


def _sentence_case(text: str) -> str:
    return text[:1].upper() + text[1:]


def criteria_table(criteria: Sequence[CriterionRow], footing: str, key: str) -> Table:
    """All information criteria on one footing, value above the best and place of each."""
    chosen = {(row.candidate, row.criterion): row for row in criteria if row.footing == footing}
    present = [
        (name, title)
        for name, title in zip(_CRITERIA, _CRITERION_TITLES, strict=True)
        if any(criterion == name for _, criterion in chosen)
    ]
    columns = [_CANDIDATE]
    for name, title in present:
        columns.append(Column(f"{name}_value", title, CellKind.DECIMAL, 1))
        if name == "aic":
            columns.append(Column("aic_delta", "AIC above the best", CellKind.DECIMAL, 1))
            columns.append(Column("aic_weight", "Akaike weight", CellKind.P_VALUE, 3))
        columns.append(Column(f"{name}_rank", f"Place by {title}", CellKind.INTEGER))
    rows: list[tuple[Cell, ...]] = []
    first = present[0][0] if present else ""
    places = {row.candidate: row.rank or math.inf for row in chosen.values() if row.criterion == first}
    for candidate in sorted({candidate: 0 for candidate, _ in chosen}, key=lambda c: places.get(c, math.inf)):
        cells: list[Cell] = [candidate]
        for name, _ in present:
            row = chosen.get((candidate, name))
            extra: list[Cell] = [row.delta, row.weight] if row else [None] * 2
            cells += [
                row.value if row else None,
                *(extra if name == "aic" else []),
                row.rank if row else None,
            ]
        rows.append(tuple(cells))
    notes = ("All criteria: smaller is better; only differences on one footing have a meaning.",)
    return Table(
        f"criteria-{key}",
        f"Information criteria: {footing_title(footing)}",
        tuple(columns),
        tuple(rows),
        notes,
    )


def _whole(number: float) -> float | int:
    """Parameters are counted; only shrinkage makes their effective number a fraction."""
    return int(number) if number.is_integer() else number


def _words(name: str) -> str | None:
    """A model's name as words, so that it can wrap."""
    return name.replace("_", " ") or None


def warning_table(
    candidates: Sequence[CandidateRow], outcomes: Sequence[OutcomeRow], pooled: Sequence[PooledScore]
) -> Table:
    """Everything that went wrong, was left out, or was held impossible, with counts and reasons."""
    columns = (
        _CANDIDATE,
        Column("what", "What", CellKind.TEXT),
        Column("where", "Where", CellKind.TEXT),
        Column("how_many", "How many", CellKind.TEXT),
        Column("reason", "Reason", CellKind.TEXT),
    )
    rows = (*_unconverged(candidates), *_not_scored(outcomes), *_impossible(pooled))
    return Table("warnings", "What failed, was left out, or was held impossible", columns, rows)


def _unconverged(candidates: Sequence[CandidateRow]) -> list[tuple[Cell, ...]]:
    return [
        (row.candidate, "fit not certified", "all dyads", "1 fit", row.message or Missing("no message"))
        for row in candidates
        if row.converged is False
    ]


def _not_scored(outcomes: Sequence[OutcomeRow]) -> list[tuple[Cell, ...]]:
    chosen = [row for row in outcomes if row.outcome in _OUTCOMES]
    groups = Counter((row.candidate, row.outcome, row.scheme, row.reason) for row in chosen)
    totals = Counter((row.candidate, row.scheme) for row in outcomes)
    rows: list[tuple[Cell, ...]] = []
    for (candidate, outcome, scheme, reason), number in groups.items():
        where = held_out_phrase(scheme) if scheme else "all dyads"
        total = count(totals[candidate, scheme], "fold" if scheme else "fit")
        how_many = f"{number:,} of {total}"
        rows.append((candidate, _OUTCOMES[outcome], where, how_many, reason or Missing("no reason given")))
    return rows


def _impossible(pooled: Sequence[PooledScore]) -> list[tuple[Cell, ...]]:
    return [
        (
            item.candidate,
            "impossible observations",
            f"{held_out_phrase(item.scheme)}, {footing_title(item.footing)}",
            f"{item.n_impossible:,} of {item.n_dyads:,} dyads",
            f"given no probability, so its {score_title(item.score, unit=False)} is infinite",
        )
        for item in pooled
        if item.score == LOG_SCORE and (item.n_impossible or math.isinf(item.value))
    ]
