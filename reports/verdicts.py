"""What one comparison says, in sentences: who leads, by how much, who ties, who is not ranked and why."""

import math
from collections.abc import Callable, Sequence

from steelyard.reports.cells import CellKind, format_cell
from steelyard.reports.comparing import Comparison, Entry, Swap
from steelyard.reports.pooling import LOG_SCORE, PooledScore
from steelyard.reports.wording import (
    count,
    finding,
    held_out_phrase,
    label_list,
    score_title,
    score_unit,
)

__all__ = ["impossible_overall", "impossible_sentences", "other_leaders", "verdict_sentences"]

_SHOWN = 6


def verdict_sentences(comparison: Comparison, pooled: Sequence[PooledScore]) -> tuple[str, ...]:
    """Sentences on one footing under one scheme, the finding first.

    Parameters
    ----------
    comparison : candidates on one footing under one scheme
    pooled : all pooled scores; those of this footing and scheme are used
    """
    if not comparison.entries:
        return ("No candidate stands here.",)
    if comparison.is_alone:
        return (f"Only {comparison.entries[0].candidate} stands on this footing; there is nothing to rank.",)
    sentences: list[str] = []
    if comparison.n_pairs:
        sentences.append(f"{finding(comparison)}.")
    sentences.append(_one_part(comparison) or _leaders(comparison))
    sentences += other_leaders(comparison, pooled)
    sentences += _swap_sentences(comparison)
    sentences += _ties(comparison)
    sentences += impossible_sentences(comparison)
    sentences += _unranked(comparison)
    if not comparison.scheme:
        sentences.append("Nothing was scored out of sample on this footing, so AIC stands unchecked.")
    elif not comparison.has_criteria:
        sentences.append(_missing_criteria(comparison))
    return tuple(sentences)


def _missing_criteria(comparison: Comparison) -> str:
    """Why a footing has no in-sample ranking."""
    if comparison.score != LOG_SCORE:
        return (
            "Out of sample only: an expected flow is scored without a law, so there is no likelihood and "
            "no information criterion."
        )
    if any(entry.converged is False for entry in comparison.entries):
        return "Out of sample only: information criteria need certified fits of whole laws."
    return (
        "Out of sample only: the parts of a joint law are not maximised one by one, so they have no "
        "information criteria."
    )


def _leaders(comparison: Comparison) -> str:
    inside, outside = comparison.in_sample(), comparison.held_out()
    parts = []
    if inside:
        parts.append(("AIC", inside[0].names, _margin(comparison.by_aic(), lambda e: e.aic, "")))
    if outside and not outside[0].entries[0].is_impossible:
        by = f"the {score_title(comparison.score, unit=False)}"
        unit = score_unit(comparison.score)
        parts.append((by, outside[0].names, _margin(comparison.by_held_out(), _held_out_value, unit)))
    elif outside:
        return "No candidate has a finite score out of sample."
    if len(parts) == 2 and not set(parts[0][1]) ^ set(parts[1][1]):
        return f"Both put {label_list(parts[0][1], _SHOWN)} first."
    told = [f"{by} puts {label_list(names, _SHOWN)} first{margin}" for by, names, margin in parts]
    text = "; ".join(told) or "no candidate is ranked"
    return text[:1].upper() + text[1:] + "."


def _one_part(comparison: Comparison) -> str:
    """Where all candidates are one and the same here; else ""."""
    standings = comparison.held_out()
    if comparison.has_criteria or len(standings) != 1 or not standings[0].shared:
        return ""
    if len(standings[0].entries) < len(comparison.entries):
        return ""
    names = label_list(standings[0].names, _SHOWN)
    return f"{names} share the {standings[0].shared}, so there is nothing to rank."


def _held_out_value(entry: Entry) -> float:
    return entry.held_out.value if entry.held_out else math.nan


def _margin(ranked: Sequence[Entry], value: Callable[[Entry], float], unit: str) -> str:
    """How far the first stands from the next: ", 975 below the next"; "" where there is no finite next."""
    values = [value(entry) for entry in ranked]
    others = [item for item in values if item != values[0] and math.isfinite(item)]
    if not others:
        return ""
    gap = others[0] - values[0]
    written = format_cell(abs(gap), CellKind.SIGNIFICANT, 3)
    return f", {written}{f' {unit}' if unit else ''} {'below' if gap > 0 else 'above'} the next"


def other_leaders(comparison: Comparison, pooled: Sequence[PooledScore]) -> tuple[str, ...]:
    """Who leads by each further score on the same footing, as the Brier score beside the log score."""
    own = set(comparison.held_out()[0].names) if comparison.held_out() else set()
    here = [item for item in pooled if (item.footing, item.scheme) == (comparison.footing, comparison.scheme)]
    sentences = []
    for score in dict.fromkeys(item.score for item in here if item.score != comparison.score):
        best = {item.candidate for item in here if item.score == score and item.rank == 1}
        first = [entry.candidate for entry in comparison.entries if entry.candidate in best]
        if first:
            lead = "too" if set(first) == own else "instead" if not set(first) & own else "there"
            verb = "leads" if len(first) == 1 else "lead"
            title = score_title(score, unit=False)
            sentences.append(f"By the {title}, {label_list(first, _SHOWN)} {verb} {lead}.")
    return tuple(sentences)


def _swap_sentences(comparison: Comparison) -> list[str]:
    swaps: Sequence[Swap] = comparison.swaps()
    overtaken: dict[str, list[str]] = {}
    for swap in swaps:
        overtaken.setdefault(swap.ahead_in_sample, []).append(swap.ahead_held_out)
    falls = [f"{name} falls behind {label_list(others, 4)}." for name, others in overtaken.items()]
    if not falls:
        return []
    more = len(falls) - _SHOWN
    rest = f" {count(more, 'candidate')} more fall behind others." if more > 0 else ""
    return [f"On {held_out_phrase(comparison.scheme)}, {' '.join(falls[:_SHOWN])}{rest}"]


def _ties(comparison: Comparison) -> list[str]:
    """Finite ties out of sample: equal scores because candidates share a part."""
    sentences = []
    for standing in () if _one_part(comparison) else comparison.held_out():
        if len(standing.entries) > 1 and not standing.entries[0].is_impossible:
            names = label_list(standing.names, _SHOWN)
            why = f"share the {standing.shared}, so they score alike" if standing.shared else "score alike"
            sentences.append(f"{names} {why}.")
    return sentences


def impossible_sentences(comparison: Comparison) -> tuple[str, ...]:
    """Which candidates gave some held-out dyads no chance, the leader by AIC first."""
    leader = comparison.in_sample()[0].names if comparison.in_sample() else ()
    groups: dict[tuple[int, int, bool], list[str]] = {}
    for entry in comparison.entries:
        score = entry.held_out
        if score is not None and score.n_impossible and entry.is_impossible:
            key = (score.n_impossible, score.n_dyads, entry.candidate in leader)
            groups.setdefault(key, []).append(entry.candidate)
    where = held_out_phrase(comparison.scheme)
    sentences = []
    for (number, n_dyads, leads), names in sorted(groups.items(), key=lambda group: not group[0][2]):
        lead = (" leads by AIC but" if len(names) == 1 else " lead by AIC but") if leads else ""
        sentences.append(f"{label_list(names, _SHOWN)}{lead} {_no_chance(number, n_dyads, where, names)}")
    return tuple(sentences)


def impossible_overall(comparisons: Sequence[Comparison]) -> tuple[str, ...]:
    """The same over all footings, each candidate and number of dyads once, without who leads."""
    groups: dict[tuple[int, int, str], dict[str, None]] = {}
    for comparison in comparisons:
        for entry in comparison.entries:
            score = entry.held_out
            if score is not None and score.n_impossible and entry.is_impossible:
                key = (score.n_impossible, score.n_dyads, held_out_phrase(comparison.scheme))
                groups.setdefault(key, {})[entry.candidate] = None
    return tuple(
        f"{label_list(list(names), _SHOWN)} {_no_chance(*key, list(names))}" for key, names in groups.items()
    )


def _no_chance(number: int, n_dyads: int, where: str, names: Sequence[str]) -> str:
    ending = "its log score is infinite" if len(names) == 1 else "their log scores are infinite"
    return f"gave no chance to {number:,} of the {n_dyads:,} {where}, so {ending}."


def _unranked(comparison: Comparison) -> list[str]:
    sentences = []
    if comparison.has_criteria:
        lacking = [
            f"{entry.candidate} ({'fit not certified' if entry.converged is False else 'no AIC'})"
            for entry in comparison.entries
            if entry.aic_rank is None
        ]
        sentences += [f"Not ranked in sample: {label_list(lacking, 8)}."] if lacking else []
    missing = [f"{entry.candidate} ({reason})" for entry, reason in comparison.unranked()]
    sentences += [f"Not ranked out of sample: {label_list(missing, 8)}."] if missing else []
    return sentences
