"""Sentences on the run as a whole: what was compared, how it ended, what to beware of."""

import math
from collections import Counter
from collections.abc import Sequence

from steelyard.reports.cells import CellKind, format_cell
from steelyard.reports.comparing import Comparison
from steelyard.reports.frames import CandidateRow, OutcomeRow, RunTables
from steelyard.reports.wording import count, label_list, listing

__all__ = ["caution_sentences", "compared_sentences", "outcome_sentence"]

_OUTCOMES = {"failed": "failed", "not_applicable": "not applicable"}


def compared_sentences(
    candidates: Sequence[CandidateRow], outcomes: Sequence[OutcomeRow] = ()
) -> tuple[str, ...]:
    """How many candidates of which families, on how many nodes, dyads and links, at what density.

    A candidate that has outcomes and no row of its own was not fitted to all dyads; it is named.
    """
    fitted = {row.candidate for row in candidates}
    unfitted = [name for name in dict.fromkeys(row.candidate for row in outcomes) if name not in fitted]
    left_out = (f"Not fitted to all dyads: {label_list(unfitted, 6)}.",) if unfitted and fitted else ()
    return (*_compared(candidates), *left_out)


def _compared(candidates: Sequence[CandidateRow]) -> tuple[str, ...]:
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


def outcome_sentence(outcomes: Sequence[OutcomeRow]) -> str:
    """How the fits and folds ended, in numbers: "55 of 55 fits and folds scored."."""
    if not outcomes:
        return ""
    found = Counter(row.outcome for row in outcomes)
    scored = found.pop("scored", 0)
    rest = "".join(f"; {number:,} {_OUTCOMES.get(name, name)}" for name, number in found.items())
    return f"{scored:,} of {len(outcomes):,} fits and folds scored{rest}."


def caution_sentences(tables: RunTables, comparisons: Sequence[Comparison]) -> tuple[str, ...]:
    """What the tables cannot say, as far as it concerns this run."""
    cautions = [
        "An estimate is an association on these dyads, not a cause.",
        "A network drawn or rebuilt from a model is not the real network.",
    ]
    if tables.criteria:
        cautions.append("AIC and its kin are computed in sample; they are no test of a forecast.")
    if tables.scores:
        cautions.append("Lowest and highest fold show how folds differ; they are no standard errors.")
        cautions.append(
            "No difference between two candidates carries a test yet: a lead is what was measured, not "
            "shown to exceed chance."
        )
    footings = dict.fromkeys(comparison.footing for comparison in comparisons)
    if len(footings) > 1:
        cautions.append(
            f"Scores on different footings ({len(footings)} here) differ in unit and are never compared."
        )
    closing = "The report ranks; which candidate suits a purpose is for the analyst to review and decide."
    return (*cautions, *_node_cautions(tables), closing)


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
        sentence += f" Here: {count(n_boundary, 'node parameter')} of {label_list(sorted(boundary), 6)}."
    return (sentence,)
