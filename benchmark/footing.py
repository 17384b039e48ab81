"""Footing: what makes two likelihoods comparable. The same dyads, the same unit, the same measure."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

from steelyard.datasets import Dyads
from steelyard.models import Measure

__all__ = ["Footing", "Scope"]


class Scope(Enum):
    """Which part of the flows a log-likelihood pays for."""

    WHOLE = "whole"
    GIVEN_LINKS = "given links"


@dataclass(frozen=True)
class Footing:
    """Where a log-likelihood or a score stands; only equal footings are compared.

    Attributes
    ----------
    measure : what probability is put on; None for scores of the expected flow, which need no law
    scope : all dyads, or the weights of dyads whose links are taken as given
    unit : the amount that one count stands for; 1 for links, which have no unit
    dyads : digest of the dyads and of what is observed on them
    """

    measure: Measure | None
    scope: Scope
    unit: float
    dyads: str

    @classmethod
    def of(cls, dyads: Dyads, measure: Measure | None, scope: Scope = Scope.WHOLE) -> Footing:
        """The footing of a law of some measure on these dyads."""
        unit = 1.0 if measure is Measure.LINKS else dyads.unit
        return cls(measure, scope, unit, dyads.digest)

    @property
    def text(self) -> str:
        """As tables show it."""
        name = "expected flows" if self.measure is None else self.measure.value
        if self.scope is Scope.GIVEN_LINKS:
            name += " given links"
        unit = "" if self.measure is Measure.LINKS else f" · unit {self.unit:g}"
        return f"{name}{unit} · dyads {self.dyads[:8]}"
