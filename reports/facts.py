"""What a report is told besides the tidy tables."""

from dataclasses import dataclass
from enum import Enum

__all__ = ["FootingSheet", "MethodSheet", "ReportFacts", "ReportFormat"]

_NO_FOOTING = "No likelihood footing (mean only)"


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
class FootingSheet:
    """One footing in words: its text in the tables, a title, and what a comparison on it is read for."""

    text: str
    title: str
    purpose: str


@dataclass(frozen=True)
class ReportFacts:
    """Title, (label, value) pairs about the data and the run, method sheets, notes, footings in reading order.

    Anything that changes from run to run (a date, say) reaches a report only through here.
    """

    title: str
    data: tuple[tuple[str, str], ...] = ()
    methods: tuple[MethodSheet, ...] = ()
    provenance: tuple[tuple[str, str], ...] = ()
    notes: tuple[str, ...] = ()
    footings: tuple[FootingSheet, ...] = ()

    def footing(self, text: str) -> FootingSheet:
        """The sheet of a footing; one that has none is called by its text, "" being no footing at all."""
        known = {sheet.text: sheet for sheet in self.footings}
        return known.get(text, FootingSheet(text, text or _NO_FOOTING, ""))

    def footing_place(self, text: str) -> int:
        """Place of a footing in reading order; those without a sheet come last."""
        return next((i for i, sheet in enumerate(self.footings) if sheet.text == text), len(self.footings))
