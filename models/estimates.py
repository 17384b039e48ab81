"""Estimates as a table: one row a parameter, standard errors by kind, and whether it is free at all."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from enum import Enum
from math import exp

from scipy.special import ndtr, ndtri

__all__ = ["ErrorKind", "Estimate", "EstimatePart", "Estimates", "Interval", "Status"]

REPAIRED = "variance repaired: negative eigenvalues clipped to zero"


class EstimatePart(Enum):
    """The part of a law that a parameter belongs to."""

    LINKS = "links"
    WEIGHTS = "weights"
    JOINT = "joint"
    INFLATION = "inflation"
    DISPERSION = "dispersion"


class ErrorKind(Enum):
    """How a standard error was computed.

    MODEL : inverse observed information, joint over all parameters of the likelihood
    ROBUST : sandwich over dyads with the factor n / (n - k) (HC1)
    NODE_CLUSTERED : sandwich over pairs of dyads that share a node, no small-sample factor
    """

    MODEL = "model"
    ROBUST = "robust"
    NODE_CLUSTERED = "node_clustered"


class Status(Enum):
    """Whether the data move a parameter."""

    FREE = "free"
    FIXED = "fixed"
    BOUNDARY = "at the boundary"


@dataclass(frozen=True)
class Interval:
    """Wald inference on one parameter: nan where it does not apply."""

    z: float
    p_value: float
    lower: float
    upper: float


@dataclass(frozen=True)
class Estimate:
    """One parameter.

    Attributes
    ----------
    part : the part of the law it belongs to
    term : the covariate's name in the study, `constant`, `alpha`, `sigma`, or `node:<label>` with its role
    value : the estimate, in the units of the covariate as it enters the model; infinite at the boundary
    standard_errors : by kind; a kind that does not apply is absent
    status : free, fixed, or at the boundary
    positive : a scale such as alpha or sigma: its interval is made on the log scale and it has no z test,
        since zero is the edge of its range
    note : what a reader must know of this row ("same as origin_size", ...)
    repaired : kinds whose covariance had to be made positive semidefinite
    """

    part: EstimatePart
    term: str
    value: float
    standard_errors: Mapping[ErrorKind, float]
    status: Status = Status.FREE
    positive: bool = False
    note: str = ""
    repaired: frozenset[ErrorKind] = frozenset()

    def note_for(self, kind: ErrorKind) -> str:
        """The note, and for a kind of standard error whose covariance was repaired, that."""
        mended = f"{kind.value.replace('_', '-')} {REPAIRED}" if kind in self.repaired else ""
        return "; ".join(n for n in (self.note, mended) if n)

    def interval(self, kind: ErrorKind, level: float = 0.95) -> Interval:
        """Normal-theory z, two-sided p-value and interval with one kind of standard error."""
        nan = float("nan")
        error = self.standard_errors.get(kind, nan)
        if self.status is not Status.FREE or not 0 < error < float("inf"):
            return Interval(nan, nan, nan, nan)
        quantile = float(ndtri(0.5 + level / 2))
        if self.positive:
            ratio = exp(quantile * error / self.value)
            return Interval(nan, nan, self.value / ratio, self.value * ratio)
        z = self.value / error
        half = quantile * error
        return Interval(z, 2 * float(ndtr(-abs(z))), self.value - half, self.value + half)


@dataclass(frozen=True)
class Estimates:
    """The parameters of a fit, in a fixed order."""

    rows: tuple[Estimate, ...]

    def __iter__(self) -> Iterator[Estimate]:
        return iter(self.rows)

    def __len__(self) -> int:
        return len(self.rows)

    def __add__(self, other: Estimates) -> Estimates:
        return Estimates(self.rows + other.rows)

    def row(self, term: str, part: EstimatePart | None = None) -> Estimate:
        """The one row of a term (and part, where a term occurs in several).

        Raises
        ------
        KeyError : no row or several rows match
        """
        found = [r for r in self.rows if r.term == term and part in (None, r.part)]
        if len(found) != 1:
            raise KeyError(f"{len(found)} estimates are named '{term}'; known: {[r.term for r in self.rows]}")
        return found[0]

    def with_part(self, part: EstimatePart) -> Estimates:
        """The same rows under another part."""
        return Estimates(tuple(replace(r, part=part) for r in self.rows))
