"""What a likelihood of linear indices offers: a value, and derivatives with respect to the indices."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol, Self, TypeAlias

from steelyard.datasets.arrays import Bools, Floats, Integers

__all__ = ["Edges", "IndexDerivatives", "IndexLikelihood", "Rows"]

Rows: TypeAlias = Bools | Integers | slice


@dataclass(frozen=True, eq=False)
class Edges:
    """(n,) which observations sit at the lower or the upper edge of what the first index can explain."""

    lower: Bools
    upper: Bools


@dataclass(frozen=True, eq=False)
class IndexDerivatives:
    """Per observation: first (m, n) and second (m, m, n) derivatives with respect to the m indices."""

    first: Floats
    second: Floats


class IndexLikelihood(Protocol):
    """The log-likelihood of a fixed response as a function of m indices."""

    @property
    def edges(self) -> Edges:
        """Which observations could drive the first index to infinity."""

    def restricted(self, keep: Rows, /) -> Self:
        """The same for some of the observations."""

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """Coefficients, index after index, at which the likelihood is finite."""

    def value(self, indices: Sequence[Floats], /) -> float:
        """Sum over observations, up to a constant that depends on the response alone."""

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        """Derivatives with respect to the indices."""
