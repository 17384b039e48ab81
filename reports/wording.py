"""Words that several parts of a report share: names of scores and schemes, findings, lists."""

from collections.abc import Mapping, Sequence
from types import MappingProxyType

from steelyard.reports.comparing import Comparison

__all__ = [
    "count",
    "finding",
    "held_out_phrase",
    "label_list",
    "listing",
    "score_title",
    "score_unit",
    "short_labels",
    "tie_remark",
]

_SCORES: Mapping[str, tuple[str, str]] = MappingProxyType(
    {
        "log_score": ("log score", "nats per dyad"),
        "brier": ("Brier score of the link", "squared probability"),
        "rmse": ("RMSE", "unit of the flows"),
    }
)
_SCHEMES: Mapping[str, str] = MappingProxyType(
    {"dyads": "held-out dyads", "nodes": "dyads of held-out nodes", "periods": "a later period"}
)


def count(number: int, noun: str, plural: str = "") -> str:
    """A number with its noun: "1 pair", "2,000 pairs"."""
    return f"{number:,} {noun if number == 1 else plural or noun + 's'}"


def listing(items: Sequence[str], limit: int = 0) -> str:
    """Join with commas and "and"; with a limit, the rest is counted."""
    shown = _limited(items, limit)
    return shown[0] if len(shown) == 1 else ", ".join(shown[:-1]) + f" and {shown[-1]}" if shown else ""


def label_list(labels: Sequence[str], limit: int = 0) -> str:
    """Join labels so that commas and "and" inside them leave no doubt where one ends."""
    shown = _limited(labels, limit)
    if any(" and " in label for label in shown):
        return "; ".join(shown)
    if len(shown) > 2 and any("," in label for label in shown):
        return "; ".join(shown[:-1]) + f"; and {shown[-1]}"
    return listing(shown)


def _limited(items: Sequence[str], limit: int) -> list[str]:
    shown = list(items)
    return [*shown[:limit], f"{len(shown) - limit} more"] if limit and len(shown) > limit else shown


def held_out_phrase(scheme: str) -> str:
    """Where a scheme scores: "held-out dyads"."""
    return _SCHEMES.get(scheme, f"what scheme {scheme} holds out")


def score_title(score: str, *, unit: bool = True) -> str:
    """A score's name, with its unit where wanted."""
    name, of = _SCORES.get(score, (score.replace("_", " "), ""))
    return f"{name} ({of})" if unit and of else name


def score_unit(score: str) -> str:
    """The unit of a score, "" where it has none of its own."""
    return _SCORES[score][1] if score == "log_score" else ""


def tie_remark(shared: str) -> str:
    """Why candidates share a place: "same weights law", or "tie"."""
    return f"same {shared}" if shared else "tie"


def finding(comparison: Comparison) -> str:
    """One sentence, without its stop, on whether the two rankings of a comparison agree."""
    n_swaps, n_pairs = len(comparison.swaps()), comparison.n_pairs
    held_out = f"the {score_title(comparison.score, unit=False)} on {held_out_phrase(comparison.scheme)}"
    if n_swaps:
        return f"AIC and {held_out} order {n_swaps:,} of {count(n_pairs, 'pair')} differently"
    if comparison.n_ties():
        return (
            f"AIC and {held_out} put no pair in opposite order ({comparison.n_ties():,} of {n_pairs:,} tie)"
        )
    number = len(comparison.ranked_twice)
    return f"AIC and {held_out} rank {'both' if number == 2 else f'all {number}'} candidates alike"


def short_labels(labels: Sequence[str], limit: int) -> dict[str, str]:
    """Labels of at most `limit` characters, cut in the middle, where that keeps all of them different."""
    head = (limit - 1) // 2
    short = {
        label: label if len(label) <= limit else f"{label[:head]}…{label[-(limit - 1 - head) :]}"
        for label in labels
    }
    return short if len(set(short.values())) == len(short) else {label: label for label in labels}
