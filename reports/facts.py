"""What a report is told besides the tidy tables."""

from dataclasses import dataclass
from enum import Enum

__all__ = ["MethodSheet", "ReportFacts", "ReportFormat"]


class ReportFormat(Enum):
    """What `write_reports` can write; figures come with the page and with Markdown."""

    HTML = "html"
    MARKDOWN = "markdown"
    CSV = "csv"


@dataclass(frozen=True)
class MethodSheet:
    """One model's method: what it states, what it estimates, where it comes from, what to beware of."""

    name: str
    family: str
    summary: str
    formula: str
    parameters: str
    sources: str
    caution: str


@dataclass(frozen=True)
class ReportFacts:
    """Title, (label, value) pairs about the data and the run, method sheets, and free notes.

    Anything that changes from run to run (a date, say) reaches a report only through here.
    """

    title: str
    data: tuple[tuple[str, str], ...] = ()
    methods: tuple[MethodSheet, ...] = ()
    provenance: tuple[tuple[str, str], ...] = ()
    notes: tuple[str, ...] = ()
