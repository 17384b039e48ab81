"""The figures of a report: rank change, and scores candidate by candidate."""

import math
import re
from collections import Counter
from collections.abc import Sequence, Set

from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from steelyard.reports.canvas import Drawing, arrange, blank_figure, drawing_style, set_title
from steelyard.reports.cells import NO_VALUE
from steelyard.reports.comparing import Comparison, Entry
from steelyard.reports.dots import DotPanel, draw_dots, draw_marker
from steelyard.reports.palette import FAINT, INK, QUIET, family_mark
from steelyard.reports.pooling import BRIER, LOG_SCORE, RMSE, PooledScore
from steelyard.reports.wording import (
    finding,
    held_out_phrase,
    label_list,
    listing,
    score_title,
    short_labels,
)

__all__ = ["FIGURE_NAMES", "comparison_drawings", "figure_key"]

# Every figure's file name starts with one of these.
FIGURE_NAMES = ("ranks", "scores")
_ROW = 0.235
_LEGEND = 0.3
_PANELS = (LOG_SCORE, BRIER, RMSE)


def figure_key(title: str, scheme: str) -> str:
    """A file name's part for a footing's title and a scheme: lower-case letters, digits and hyphens."""
    plain = re.sub(r"\([^)]*\)", "", title)
    words = re.sub(r"[^a-z0-9]+", "-", f"{plain} {scheme}".lower())
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
    tuple of drawings: rank change (where three or more candidates are ranked both ways; of two a sentence
    tells as much), and scores (where two or more candidates differ in any)
    """
    scores = [
        item
        for item in pooled
        if (item.footing, item.scheme) == (comparison.footing, comparison.scheme) and item.score in _PANELS
    ]
    by_score = [[item for item in scores if item.score == score] for score in _PANELS]
    panels = [items for items in by_score if items]
    drawings = []
    with drawing_style():
        if len(comparison.ranked_twice) > 2:
            drawings.append(_rank_change(comparison, f"ranks-{key}"))
        if any(len({(item.rank, item.complete) for item in items}) > 1 for items in panels):
            drawings.append(_scores(comparison, panels, f"scores-{key}"))
    return tuple(drawings)


def _rank_change(comparison: Comparison, name: str) -> Drawing:
    """Slope figure: places by AIC on the left, by the out-of-sample score on the right."""
    title = finding(comparison)
    n_entries = len(comparison.entries)
    figure = blank_figure(1.45 + _ROW * max(n_entries, 3))
    held_out = held_out_phrase(comparison.scheme)
    score = score_title(comparison.score, unit=False)
    top = set_title(figure, title, f"{comparison.sheet.title}; places from best (top) to worst")
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
    axes.set_xticks([0, 1], ["AIC, in sample", f"{score},\n{held_out}"])
    axes.xaxis.tick_top()
    for end in (0, 1):
        axes.axvline(end, color=FAINT, linewidth=0.8, zorder=1)
    _family_legend(figure, comparison.entries)
    arrange(figure, [[axes, twin]], top=top, bottom=_LEGEND)
    reading = (
        f"Left: places by AIC. Right: places by the {score} on {held_out}. Coloured lines belong to "
        "candidates that change order with others, the heavier the more; thin grey ones keep their "
        "order against all others. "
        "Open markers: an infinite score; dotted lines: not ranked on one side."
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


def _scores(comparison: Comparison, panels: Sequence[Sequence[PooledScore]], name: str) -> Drawing:
    """Dot figure: one panel a score, candidates in one order."""
    title = _score_finding(comparison, panels)
    names = {item.candidate for items in panels for item in items}
    figure = blank_figure((1.8 if len(panels) > 1 else 1.5) + _ROW * max(len(names), 3))
    subtitle = f"{comparison.sheet.title}; on {held_out_phrase(comparison.scheme)}"
    top = set_title(figure, title, subtitle)
    placed = []
    for index, items in enumerate(panels):
        axes = figure.add_subplot(1, len(panels), index + 1)
        panel = DotPanel(_axis_title(items, narrow=len(panels) > 1), _in_order(comparison, items, names))
        draw_dots(axes, panel, show_names=index == 0, ticks=7 // len(panels))
        placed.append([axes])
    _family_legend(figure, comparison.entries)
    arrange(figure, placed, top=top, bottom=_LEGEND)
    return Drawing(name, title, _reading([item for items in panels for item in items]), figure)


def _score_finding(comparison: Comparison, panels: Sequence[Sequence[PooledScore]]) -> str:
    leaders: dict[tuple[str, ...], list[str]] = {}
    for items in panels:
        ahead = {item.candidate for item in items if item.rank == 1 and math.isfinite(item.value)}
        first = tuple(entry.candidate for entry in comparison.entries if entry.candidate in ahead)
        if first:
            leaders.setdefault(first, []).append(score_title(items[0].score, unit=False))
    led = []
    for names, titles in leaders.items():
        verb = "has" if len(names) == 1 else "have"
        best = "lowest" if all(items[0].better != "higher" for items in panels) else "best"
        led.append(f"{label_list(names, 3)} {verb} the {best} {listing(titles)}")
    n_impossible = sum(entry.is_impossible for entry in comparison.entries)
    if n_impossible:
        led.append(f"{n_impossible} of {len(comparison.entries)} met impossible observations")
    return "; ".join(led) or "No candidate leads"


def _in_order(
    comparison: Comparison, scores: Sequence[PooledScore], wanted: Set[str]
) -> tuple[tuple[Entry, PooledScore | None], ...]:
    """Candidates from best to worst, the order that all panels share."""
    by_name = {item.candidate: item for item in scores}
    ordered = list(comparison.by_held_out())
    ordered += [entry for entry in comparison.entries if entry not in ordered]
    return tuple((e, by_name.get(e.candidate)) for e in ordered if e.candidate in wanted)


def _axis_title(scores: Sequence[PooledScore], *, narrow: bool) -> str:
    title = score_title(scores[0].score)
    if narrow:
        return title.replace(" (", "\n(") + f"\n{scores[0].better} is better"
    return f"{title}, {scores[0].better} is better"


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
        handles=handles, loc="lower left", bbox_to_anchor=(0.0, 0.0), ncols=4, frameon=False, fontsize=8.5,
        labelcolor=INK, handletextpad=0.2, borderaxespad=0.1,
    )  # fmt: skip
