"""The opening sentences of a report: what was compared, who leads where, what to beware of."""

import math
from collections import Counter
from collections.abc import Sequence

from steelyard.reports.cells import CellKind, format_cell
from steelyard.reports.comparing import Comparison, Swap
from steelyard.reports.frames import CandidateRow, RunTables
from steelyard.reports.wording import count, finding, footing_title, held_out_phrase, listing

__all__ = ["caution_sentences", "compared_sentences", "verdict_sentences"]

_SHOWN_SWAPS = 6


def compared_sentences(candidates: Sequence[CandidateRow]) -> tuple[str, ...]:
    """How many candidates of which families, on how many nodes, dyads and links, at what density."""
    if not candidates:
        return ("No candidate was compared.",)
    families = dict.fromkeys(row.family or "unstated" for row in candidates)
    counts = [
        f"{sum((row.family or 'unstated') == name for row in candidates):,} {name}" for name in families
    ]
    opening = f"{count(len(candidates), 'candidate')} ({listing(counts)})"
    sizes = {(row.n_nodes, row.n_dyads, row.n_links) for row in candidates}
    if len(sizes) == 1:
        return (f"{opening} on {_size(*sizes.pop())}.",)
    numbers = Counter((row.n_nodes, row.n_dyads, row.n_links) for row in candidates)
    groups = [f"{count(number, 'candidate')} on {_size(*size)}" for size, number in numbers.items()]
    return (f"{opening}, not all on the same dyads: {listing(groups, 5)}.",)


def _size(n_nodes: int | None, n_dyads: int | None, n_links: int | None) -> str:
    parts = [
        count(number, noun)
        for number, noun in ((n_nodes, "node"), (n_dyads, "dyad"), (n_links, "link"))
        if number is not None
    ]
    if n_dyads and n_links is not None and n_links <= n_dyads:
        parts[-1] += f" (density {format_cell(n_links / n_dyads, CellKind.SHARE, 1)})"
    return listing(parts) or "data of unstated size"


def verdict_sentences(comparison: Comparison) -> tuple[str, ...]:
    """Whether in-sample and out-of-sample rankings of one footing agree, and which pairs swap."""
    if not comparison.scheme:
        return ("Nothing was scored out of sample on this footing, so AIC stands unchecked.",)
    if not any(entry.held_out for entry in comparison.entries):
        return ("No candidate has a log score here; means are compared by the other scores only.",)
    if len(comparison.entries) == 1:
        return ("Only one candidate stands on this footing, so there is nothing to rank.",)
    sentences = []
    if comparison.n_pairs:
        sentences.append(f"{finding(comparison)}.")
        sentences.append(_leaders(comparison))
        swaps = comparison.swaps()
        if swaps:
            sentences.append(_swap_sentence(swaps, held_out_phrase(comparison.scheme)))
    else:
        sentences.append("Fewer than two candidates are ranked both in sample and out of sample.")
    missing = [f"{entry.candidate} ({reason})" for entry, reason in comparison.unranked()]
    if missing:
        sentences.append(f"Not ranked out of sample: {listing(missing, 8)}.")
    return tuple(sentences)


def _leaders(comparison: Comparison) -> str:
    both = comparison.ranked_twice
    best_place = min(entry.held_out_rank or math.inf for entry in both)
    first_in = [entry.candidate for entry in both if entry.aic_rank == both[0].aic_rank]
    first_out = [entry.candidate for entry in both if entry.held_out_rank == best_place]
    if first_in == first_out:
        return f"Both put {listing(first_in)} first."
    return f"AIC puts {listing(first_in)} first, the log score {listing(first_out, 4)}."


def _swap_sentence(swaps: Sequence[Swap], held_out: str) -> str:
    overtaken: dict[str, list[str]] = {}
    for swap in swaps:
        overtaken.setdefault(swap.ahead_in_sample, []).append(swap.ahead_held_out)
    falls = [f"{name} falls behind {listing(others, 4)}" for name, others in overtaken.items()]
    more = len(falls) - _SHOWN_SWAPS
    rest = f"; and {count(more, 'candidate')} behind others" if more > 0 else ""
    return f"On {held_out}, {'; '.join(falls[:_SHOWN_SWAPS])}{rest}."


def caution_sentences(tables: RunTables, comparisons: Sequence[Comparison]) -> tuple[str, ...]:
    """What the tables cannot say, as far as it concerns this run."""
    cautions = [
        "An estimate is an association on these dyads, not a cause.",
        "A network drawn or rebuilt from a model is not the real network.",
    ]
    if tables.criteria:
        cautions.append("AIC and its kin are computed in sample; they are no test of a forecast.")
    if tables.scores:
        cautions.append(
            "Lowest and highest fold show how folds differ; they are no standard errors, and a difference "
            "between two candidates is not shown to exceed chance here."
        )
    footings = dict.fromkeys(footing_title(comparison.footing) for comparison in comparisons)
    if len(footings) > 1:
        cautions.append(
            f"Scores on different footings ({len(footings)} here) differ in unit and are never compared."
        )
    return (*cautions, *_node_cautions(tables))


def _node_cautions(tables: RunTables) -> tuple[str, ...]:
    nodes = {(row.candidate, row.part, row.term): row.estimate for row in tables.estimates if row.is_node}
    if not nodes:
        return ()
    boundary = {key[0] for key, estimate in nodes.items() if math.isinf(estimate)}
    n_boundary = sum(math.isinf(estimate) for estimate in nodes.values())
    sentence = (
        "A node parameter at the boundary (a node without links, or with all of them) has no finite value "
        "and no standard error; its dyads are held certain; one surprise there makes the log score infinite."
    )
    if n_boundary:
        sentence += f" Here: {count(n_boundary, 'node parameter')} of {listing(sorted(boundary), 6)}."
    return (sentence,)
