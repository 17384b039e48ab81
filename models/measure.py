"""What a law puts probability on. Two log-likelihoods are comparable only on one measure."""

from __future__ import annotations

from enum import Enum

__all__ = ["Measure"]


class Measure(Enum):
    """The space on which a law states probabilities.

    LINKS : 0 or 1 for each dyad.
    COUNTS : whole numbers of the study's unit.
    AMOUNTS : an atom at zero plus a density on positive amounts, in the study's unit.
    """

    LINKS = "links"
    COUNTS = "counts"
    AMOUNTS = "amounts"
