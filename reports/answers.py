"""The opening of a report: one line a footing, who leads in sample, who out of sample, do they agree."""

import re
from collections.abc import Sequence
from dataclasses import dataclass

from steelyard.reports.comparing import Comparison, Standing
from steelyard.reports.pooling import PooledScore
from steelyard.reports.verdicts import impossible_sentences, other_leaders
from steelyard.reports.wording import count, held_out_phrase, label_list, score_title, tie_remark

__all__ = ["Answer", "Lead", "alone_sentence", "answers", "short_title"]


@dataclass(frozen=True)
class Lead:
    """Who leads on one side: names (none where nobody is ranked), the measure, and a remark."""

    names: tuple[str, ...]
    by: str
    remark: str

    @property
    def text(self) -> str:
        """The names in one line, of more than two the first, with the remark."""
        names = label_list(self.names, 0 if len(self.names) < 3 else 1) if self.names else "none"
        return f"{names} ({self.remark})" if self.remark else names


@dataclass(frozen=True)
class Answer:
    """What one comparison answers: leaders in and out of sample (None where there is no such side)."""

    title: str
    held_out: str
    in_sample: Lead | None
    out_of_sample: Lead | None
    agreement: str
    remarks: tuple[str, ...]


def answers(comparisons: Sequence[Comparison], pooled: Sequence[PooledScore]) -> tuple[Answer, ...]:
    """Answers of all comparisons in which two or more candidates stand, in reading order."""
    return tuple(_answer(comparison, pooled) for comparison in comparisons if not comparison.is_alone)


def alone_sentence(comparisons: Sequence[Comparison]) -> str:
    """One line on the footings with a single candidate; "" where there are none."""
    groups: dict[str, list[str]] = {}
    for comparison in comparisons:
        if comparison.is_alone:
            titles = groups.setdefault(comparison.entries[0].candidate, [])
            title = short_title(comparison.sheet.title)
            titles += [title] if title not in titles else []
    told = []
    for name, titles in groups.items():
        quoted = [f"\N{LEFT DOUBLE QUOTATION MARK}{t}\N{RIGHT DOUBLE QUOTATION MARK}" for t in titles]
        told.append(f"Only {name} stands on {label_list(quoted)}; there is nothing to rank.")
    return " ".join(told)


def short_title(title: str) -> str:
    """A title without what stands in parentheses."""
    return re.sub(r" *\([^)]*\)", "", title)


def _answer(comparison: Comparison, pooled: Sequence[PooledScore]) -> Answer:
    inside, outside = comparison.in_sample(), comparison.held_out()
    impossible = impossible_sentences(comparison)
    leader = inside[0].entries if inside else ()
    return Answer(
        title=comparison.sheet.title,
        held_out=held_out_phrase(comparison.scheme) if comparison.scheme else "",
        in_sample=_lead(inside, "AIC") if inside else None,
        out_of_sample=_lead(outside, score_title(comparison.score, unit=False))
        if comparison.scheme
        else None,
        agreement=_agreement(comparison),
        remarks=(
            *(impossible[:1] if any(entry.is_impossible for entry in leader) else ()),
            *other_leaders(comparison, pooled),
        ),
    )


def _lead(standings: Sequence[Standing], by: str) -> Lead:
    if not standings:
        return Lead((), by, "no candidate is ranked")
    first = standings[0]
    if by != "AIC" and first.entries[0].is_impossible:
        return Lead((), by, "every score is infinite")
    remark = tie_remark(first.shared) if len(first.entries) > 1 else ""
    return Lead(first.names, by, remark)


def _agreement(comparison: Comparison) -> str:
    if not comparison.scheme:
        return "in sample only"
    if not comparison.has_criteria:
        standings = comparison.held_out()
        alike = len(standings) == 1 and len(comparison.entries) > 1
        return "out of sample only; all score alike" if alike else "out of sample only"
    n_pairs, n_swaps = comparison.n_pairs, len(comparison.swaps())
    if not n_pairs:
        return "too few candidates are ranked both ways"
    if n_swaps:
        return f"they disagree on {n_swaps:,} of {count(n_pairs, 'pair')}"
    if comparison.n_ties():
        return f"they agree ({comparison.n_ties():,} of {count(n_pairs, 'pair')} tie)"
    return "they agree" if n_pairs == 1 else f"they agree on all {n_pairs:,} pairs"
