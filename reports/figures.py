"""The figures of a report: rank change, and scores candidate by candidate."""

import re
from collections import Counter
from collections.abc import Sequence

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from steelyard.reports.canvas import Drawing, blank_figure, drawing_style, set_title
from steelyard.reports.cells import NO_VALUE
from steelyard.reports.comparing import Comparison, Entry
from steelyard.reports.dots import DotPanel, draw_dots, draw_marker
from steelyard.reports.palette import FAINT, INK, QUIET, family_mark
from steelyard.reports.pooling import LOG_SCORE, PooledScore
from steelyard.reports.wording import (
    finding,
    footing_title,
    held_out_phrase,
    listing,
    score_title,
    short_labels,
)

__all__ = ["comparison_drawings", "figure_key"]

_ROW = 0.235


def figure_key(footing: str, scheme: str) -> str:
    """A file name's part for a footing and a scheme: lower-case letters, digits and hyphens."""
    words = re.sub(r"[^a-z0-9]+", "-", f"{footing_title(footing)} {scheme}".lower())
    return words.strip("-")


def comparison_drawings(
    comparison: Comparison, pooled: Sequence[PooledScore], key: str
) -> tuple[Drawing, ...]:
    """Draw one comparison.

    Parameters
    ----------
    comparison : candidates on one footing under one scheme
    pooled : all pooled scores; those of this footing and scheme are used
    key : part of the figures' names that no other comparison has

    Returns
    -------
    tuple of drawings: rank change (where two or more candidates are ranked both ways), log score (where
    there is one), link Brier score and RMSE in one figure (where there is either)
    """
    scores = [
        item for item in pooled if (item.footing, item.scheme) == (comparison.footing, comparison.scheme)
    ]
    drawings = []
    with drawing_style():
        if comparison.n_pairs:
            drawings.append(_rank_change(comparison, f"ranks-{key}"))
        log_scores = [item for item in scores if item.score == LOG_SCORE]
        if log_scores:
            drawings.append(_log_score(comparison, log_scores, f"log-score-{key}"))
        others = [item for item in scores if item.score in ("brier", "rmse")]
        if others:
            drawings.append(_other_scores(comparison, others, f"brier-rmse-{key}"))
    return tuple(drawings)


def _rank_change(comparison: Comparison, name: str) -> Drawing:
    """Slope figure: places by AIC on the left, by the out-of-sample log score on the right."""
    title = finding(comparison)
    n_entries = len(comparison.entries)
    figure = blank_figure(1.35 + _ROW * max(n_entries, 3))
    held_out = held_out_phrase(comparison.scheme)
    set_title(figure, title, f"{footing_title(comparison.footing)}; places from best (top) to worst")
    axes = figure.subplots()
    left = list(comparison.by_aic())
    left += [entry for entry in comparison.entries if entry.aic_rank is None]
    reasons = {entry.candidate: reason for entry, reason in comparison.unranked()}
    right = list(comparison.by_held_out())
    right += [entry for entry in left if entry.candidate in reasons]
    labels = short_labels([entry.candidate for entry in comparison.entries], 30)
    _slopes(axes, comparison, left, right)
    _end_labels(axes, left, [f"{labels[e.candidate]}  {_place(e.aic_rank)}" for e in left])
    twin = axes.twinx()
    _end_labels(twin, right, [_right_label(e, labels[e.candidate], reasons) for e in right])
    axes.set_xticks([0, 1], ["AIC, in sample", f"log score,\n{held_out}"])
    axes.xaxis.tick_top()
    for end in (0, 1):
        axes.axvline(end, color=FAINT, linewidth=0.8, zorder=1)
    _family_legend(figure, comparison.entries)
    reading = (
        f"Left: places by AIC. Right: places by the mean log score on {held_out}. Coloured lines belong to "
        "candidates that change order with others, the heavier the more; thin grey ones keep their "
        "order against all others. "
        "Open markers: an infinite log score; dotted lines: not ranked on one side."
    )
    return Drawing(name, title, reading, figure)


def _slopes(axes: Axes, comparison: Comparison, left: list[Entry], right: list[Entry]) -> None:
    swaps = comparison.swaps()
    crossings = Counter(name for swap in swaps for name in (swap.ahead_in_sample, swap.ahead_held_out))
    most = max(crossings.values(), default=1)
    place = {entry.candidate: index for index, entry in enumerate(right)}
    for index, entry in enumerate(left):
        mark = family_mark(entry.family)
        both = entry.aic_rank is not None and entry.held_out_rank is not None
        crosses = crossings[entry.candidate]
        ends = (index, place[entry.candidate])
        axes.plot(
            (0, 1),
            ends,
            linestyle="-" if both else ":",
            color=mark.colour if crosses else QUIET,
            linewidth=1.0 + 1.6 * crosses / most if crosses else 0.8,
            zorder=3 if crosses else 2,
        )
        hollow = not both or entry.is_impossible
        for end, fill in ((0, entry.aic_rank is not None), (1, not hollow)):
            draw_marker(axes, mark, (end, ends[end]), filled=fill)
    axes.set_xlim(0, 1)


def _end_labels(axes: Axes, entries: list[Entry], labels: list[str]) -> None:
    axes.set_ylim(len(entries) - 0.5, -0.5)
    axes.set_yticks(range(len(entries)), labels)
    axes.tick_params(axis="both", length=0, pad=7)
    axes.spines[:].set_visible(False)


def _place(rank: int | None) -> str:
    return str(rank) if rank is not None else NO_VALUE


def _right_label(entry: Entry, label: str, reasons: dict[str, str]) -> str:
    if entry.candidate in reasons:
        return f"{NO_VALUE}  {label} ({reasons[entry.candidate]})"
    if entry.is_impossible:
        return f"{_place(entry.held_out_rank)}  {label} (∞)"
    return f"{_place(entry.held_out_rank)}  {label}"


def _log_score(comparison: Comparison, scores: Sequence[PooledScore], name: str) -> Drawing:
    best = next((entry for entry in comparison.by_held_out()), None)
    n_impossible = sum(entry.is_impossible for entry in comparison.entries)
    lead = (
        f"{best.candidate} has the lowest log score on {held_out_phrase(comparison.scheme)}"
        if best and not best.is_impossible
        else f"Log scores on {held_out_phrase(comparison.scheme)}"
    )
    tail = (
        ""
        if not n_impossible
        else f"; {n_impossible} of {len(comparison.entries)} met impossible observations"
    )
    figure = blank_figure(1.9 + _ROW * max(len(scores), 3))
    reading = _reading(scores)
    set_title(figure, lead + tail, footing_title(comparison.footing))
    axes = figure.subplots()
    draw_dots(axes, DotPanel(_axis_title(scores), _in_order(comparison, scores)), show_names=True)
    _family_legend(figure, comparison.entries)
    return Drawing(name, lead + tail, reading, figure)


def _other_scores(comparison: Comparison, scores: Sequence[PooledScore], name: str) -> Drawing:
    panels = []
    leaders: dict[str, list[str]] = {}
    names = list(dict.fromkeys(entry.candidate for entry in comparison.entries))
    for score in ("brier", "rmse"):
        chosen = [item for item in scores if item.score == score]
        if chosen:
            panels.append(DotPanel(_axis_title(chosen), _in_order(comparison, chosen)))
            first = [item.candidate for item in chosen if item.rank == 1]
            if len(first) == 1:
                leaders.setdefault(first[0], []).append(score_title(score, unit=False))
    led = [f"{name} has the lowest {listing(titles)}" for name, titles in leaders.items()]
    title = "; ".join(led) or "No single candidate leads"
    figure = blank_figure(1.95 + _ROW * max(len(names), 3))
    set_title(figure, title, f"{footing_title(comparison.footing)}; on {held_out_phrase(comparison.scheme)}")
    for index, panel in enumerate(panels):
        axes = figure.add_subplot(1, len(panels), index + 1)
        draw_dots(axes, panel, show_names=index == 0)
    _family_legend(figure, comparison.entries)
    return Drawing(name, title, _reading(scores), figure)


def _in_order(
    comparison: Comparison, scores: Sequence[PooledScore]
) -> tuple[tuple[Entry, PooledScore | None], ...]:
    """Candidates from best to worst log score, the order all score figures of a comparison share."""
    by_name = {item.candidate: item for item in scores}
    ordered = list(comparison.by_held_out())
    ordered += [entry for entry in comparison.entries if entry not in ordered]
    wanted = {item.candidate for item in scores} | {e.candidate for e in ordered if e.held_out is not None}
    return tuple((e, by_name.get(e.candidate)) for e in ordered if e.candidate in wanted)


def _axis_title(scores: Sequence[PooledScore]) -> str:
    title = score_title(scores[0].score).replace(" (", "\n(")
    return f"{title}\n{scores[0].better} is better"


def _reading(scores: Sequence[PooledScore]) -> str:
    folds = max(item.n_folds_expected for item in scores)
    return (
        f"Marker: mean over all held-out dyads of {folds} folds. Line: lowest to highest fold, a range of "
        "folds and not an uncertainty. An arrow at the edge: off the scale, with its value. An open marker "
        "beyond the rule: infinite, with the number of held-out dyads that the candidate held impossible. "
        "A dagger: not scored on all folds, so the mean covers other dyads and has no place."
    )


def _family_legend(figure: Figure, entries: Sequence[Entry]) -> None:
    marks = list(dict.fromkeys(family_mark(entry.family) for entry in entries))
    handles = [
        Line2D([], [], color=mark.colour, marker=mark.marker, linestyle="none", label=mark.title)
        for mark in marks
    ]
    figure.legend(
        handles=handles, loc="outside lower left", ncols=4, frameon=False, fontsize=8.5, labelcolor=INK,
        handletextpad=0.2, borderaxespad=0.1,
    )  # fmt: skip
