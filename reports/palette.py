"""Colours and markers of figures, and the style variables that replace the colours inside the page."""

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

__all__ = ["FAINT", "INK", "OBSERVED", "PAGE_COLOURS", "PAPER", "QUIET", "FamilyMark", "family_mark"]

# Black is kept for the observed network, so text and axes are a dark grey.
OBSERVED = "#000000"
INK = "#2a2b2e"
QUIET = "#8a8d93"
FAINT = "#dcdde0"
PAPER = "#ffffff"


@dataclass(frozen=True)
class FamilyMark:
    """A family's hue and marker; either alone tells the families apart."""

    colour: str
    marker: str
    title: str


# Blue, orange and green of Okabe & Ito (2008), told apart under the common kinds of colour blindness.
_MARKS: Mapping[str, FamilyMark] = MappingProxyType(
    {
        "econometric": FamilyMark("#0072b2", "o", "econometric"),
        "maximum-entropy": FamilyMark("#d55e00", "D", "maximum entropy"),
    }
)
_OTHER = ("#009e73", "^")

# The page swaps each figure colour for a style variable, so that figures follow a dark page.
PAGE_COLOURS: Mapping[str, str] = MappingProxyType(
    {
        OBSERVED: "--observed",
        INK: "--ink",
        QUIET: "--quiet",
        FAINT: "--faint",
        PAPER: "--paper",
        "#0072b2": "--econometric",
        "#d55e00": "--maximum-entropy",
        "#009e73": "--mixed",
    }
)


def family_mark(family: str) -> FamilyMark:
    """Mark of a family; candidates of mixed or unknown family share a third mark under their own name."""
    return _MARKS.get(family, FamilyMark(*_OTHER, family or "family not stated"))
