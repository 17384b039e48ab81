"""Reading tables: what a person looks at, made from rows, pooled scores and comparisons."""

import math
from collections.abc import Sequence

from steelyard.reports.comparing import Comparison, Entry
from steelyard.reports.facts import FootingSheet, ReportFacts
from steelyard.reports.frames import CandidateRow, CriterionRow
from steelyard.reports.pooling import LOG_SCORE, PooledScore
from steelyard.reports.tables import Cell, CellKind, Column, Missing, Table
from steelyard.reports.wording import held_out_phrase, label_list, score_title

__all__ = ["candidate_table", "criteria_table", "ranking_table", "score_table"]

_CANDIDATE = Column("candidate", "Candidate", CellKind.TEXT)
_CRITERIA = ("aic", "aicc", "bic", "hqic")
_CRITERION_TITLES = ("AIC", "AICc", "BIC", "HQIC")


def candidate_table(candidates: Sequence[CandidateRow], facts: ReportFacts) -> Table:
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
            facts.footing(row.footing).title,
        )
        for row in candidates
    )
    notes = (
        "Is told: what a candidate knows of the data besides its covariates; candidates that know more can "
        "be expected to fit better.",
        "Residual: norm of the gradient, or the worst violated constraint, relative to its scale.",
    )
    return Table("candidates", "Candidates as fitted to all dyads", columns, rows, notes)


_WHO = (
    _CANDIDATE,
    Column("family", "Family", CellKind.TEXT),
    Column("information", "Is told", CellKind.TEXT),
)
_IN_SAMPLE = (
    Column("n_parameters", "Parameters", CellKind.SIGNIFICANT, 4),
    Column("aic", "AIC", CellKind.DECIMAL, 1),
    Column("aic_delta", "AIC above the best", CellKind.DECIMAL, 1),
    Column("aic_rank", "Place by AIC", CellKind.INTEGER),
)


def _held_out_columns(score: str) -> tuple[Column, ...]:
    kind = CellKind.DECIMAL if score == LOG_SCORE else CellKind.SIGNIFICANT
    title = score_title(score, unit=False)
    columns = [
        Column(score, f"{_sentence_case(title)}, out of sample", kind, 4),
        Column("lowest", "Lowest fold", kind, 4),
        Column("highest", "Highest fold", kind, 4),
    ]
    if score == LOG_SCORE:
        columns.append(Column("n_impossible", "Impossible dyads", CellKind.INTEGER))
    return (*columns, Column("held_out_rank", f"Place by {title}", CellKind.INTEGER))


def ranking_table(comparison: Comparison, key: str) -> Table:
    """In sample and out of sample side by side, on one footing under one scheme, best by AIC first.

    A half that has nothing to show is left out; without the in-sample half, best out of sample first.
    """
    ranked = comparison.by_aic() or comparison.by_held_out()
    placed = {entry.candidate for entry in ranked}
    ordered = [*ranked, *(entry for entry in comparison.entries if entry.candidate not in placed)]
    columns, caption = list(_WHO), []
    if comparison.has_criteria:
        columns += _IN_SAMPLE
        caption.append("in sample")
    if comparison.scheme:
        columns += _held_out_columns(comparison.score)
        caption.append("out of sample")
    reasons = {entry.candidate: reason for entry, reason in comparison.unranked()}
    rows = []
    for entry in ordered:
        cells: list[Cell] = [entry.candidate, entry.family or None, entry.information or None]
        if comparison.has_criteria:
            cells += [_whole(entry.n_parameters), entry.aic, entry.aic_delta, entry.aic_rank]
        if comparison.scheme:
            cells += _held_out_cells(entry, reasons.get(entry.candidate, ""), comparison.score)
        rows.append(tuple(cells))
    held_out = f" ({held_out_phrase(comparison.scheme)})" if comparison.scheme else ""
    title = f"{_sentence_case(' and '.join(caption))}{held_out}: {comparison.sheet.title}"
    return Table(f"ranking-{key}", title, tuple(columns), tuple(rows), _ranking_notes(comparison))


def _ranking_notes(comparison: Comparison) -> tuple[str, ...]:
    doubtful = [entry.candidate for entry in comparison.entries if entry.converged is False]
    notes = [f"Fit not certified, so its numbers may move: {label_list(doubtful)}."] if doubtful else []
    if comparison.scheme:
        held_out = held_out_phrase(comparison.scheme)
        notes.append(
            f"Log score: mean negative log density over {held_out}, in nats per dyad; lower is better."
            if comparison.score == LOG_SCORE
            else f"{_sentence_case(score_title(comparison.score))}, over {held_out}."
        )
        notes.append("Lowest and highest fold are a range of folds, not a standard error.")
    if comparison.scheme and comparison.score == LOG_SCORE:
        notes.append(
            "An impossible dyad is a held-out observation to which the candidate gives no probability; "
            "one makes the log score infinite."
        )
    return tuple(notes)


def _held_out_cells(entry: Entry, reason: str, score: str) -> list[Cell]:
    item = entry.held_out
    place = Missing(reason) if entry.held_out_rank is None else entry.held_out_rank
    impossible: list[Cell] = [item.n_impossible if item else None] if score == LOG_SCORE else []
    values: list[Cell] = [item.value, item.lowest, item.highest] if item else [None] * 3
    return [*values, *impossible, place]


def score_table(comparison: Comparison, pooled: Sequence[PooledScore], key: str) -> Table | None:
    """All other scores of one comparison, pooled over folds; None where there are none."""
    chosen = [
        item
        for item in pooled
        if (item.footing, item.scheme) == (comparison.footing, comparison.scheme)
        and item.score != comparison.score
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
    caption = f"Other scores on {held_out_phrase(comparison.scheme)}: {comparison.sheet.title}"
    return Table(f"scores-{key}", caption, tuple(columns), tuple(rows), notes)


def _score_cells(item: PooledScore | None) -> list[Cell]:
    if item is None:
        return [None] * 4
    lacking = Missing(f"{item.n_folds} of {item.n_folds_expected} folds")
    return [item.value, item.lowest, item.highest, lacking if item.rank is None else item.rank]


def _sentence_case(text: str) -> str:
    return text[:1].upper() + text[1:]


def criteria_table(criteria: Sequence[CriterionRow], sheet: FootingSheet, key: str) -> Table:
    """All information criteria on one footing, value above the best and place of each."""
    chosen = {(row.candidate, row.criterion): row for row in criteria if row.footing == sheet.text}
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
        f"Information criteria: {sheet.title}",
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
