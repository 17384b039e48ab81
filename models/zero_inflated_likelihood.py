"""Zero-inflated counts: a count law, but for a share of dyads that are zero whatever the law says."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from scipy.special import expit

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.index_objective import IndexObjective, even_rows
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import NegativeBinomialQuadratic, Poisson, least_squares
from steelyard.models.solvers import newton_maximise
from steelyard.models.truncated_likelihoods import TruncatedPoisson

__all__ = ["ZeroInflated"]

DISPERSIONS = (0.3, 1.5, 8.0)
SAMPLE_ROWS = 8_000
SEARCH_STEPS = 40
MOST_STARTS = 4


def _best_first(objective: IndexObjective, points: Sequence[Floats]) -> list[Floats]:
    """Points in order of their value, those without one last."""
    values = np.array([objective.value(p) for p in points])
    return [points[i] for i in np.argsort(-np.where(np.isfinite(values), values, -np.inf), kind="stable")]


@dataclass(frozen=True, eq=False)
class ZeroInflated:
    """P(0) = pi + (1 - pi) f(0) and P(w) = (1 - pi) f(w), f a count law.

    Index 1 is the log mean of f, index 2 the log odds of pi, and with `dispersed` index 3 is log alpha of a negative
    binomial f (variance mu + alpha mu^2), equal for all.

    Attributes
    ----------
    response : (n,) counts
    never : (n,) observations that cannot be inflated (pi = 0), whose second index does not matter
    dispersed : negative binomial rather than Poisson
    """

    response: Floats
    never: Bools
    dispersed: bool

    @property
    def edges(self) -> Edges:
        # A mean that falls to 0 makes a zero certain, inflated or not.
        return Edges(self.response == 0, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> ZeroInflated:
        return replace(self, response=self.response[keep], never=self.never[keep])

    @cached_property
    def _rows(self) -> tuple[Rows, Rows]:
        """Zeros that may be inflated, and all other observations."""
        mixed = (self.response == 0) & ~self.never
        return np.flatnonzero(mixed), np.flatnonzero(~mixed)

    def _count(self, response: Floats) -> Poisson | NegativeBinomialQuadratic:
        return NegativeBinomialQuadratic(response) if self.dispersed else Poisson(response)

    @cached_property
    def _every(self) -> Poisson | NegativeBinomialQuadratic:
        return self._count(self.response)

    @cached_property
    def _others(self) -> Poisson | NegativeBinomialQuadratic:
        return self._count(self.response[self._rows[1]])

    def _log_zero(self, indices: Sequence[Floats], rows: Rows) -> Floats:
        """(m,) log f(0) of some observations."""
        mean = np.exp(indices[0][rows])
        if not self.dispersed:
            return -mean
        size = float(np.exp(-indices[2][0]))
        return -size * np.log1p(mean / size)

    def value(self, indices: Sequence[Floats], /) -> float:
        mixed, others = self._rows
        odds = indices[1]
        counts = [indices[0][others], *(i[others] for i in indices[2:])]
        total = self._others.value(counts) if len(counts[0]) else 0.0
        total -= float(np.logaddexp(0.0, odds[~self.never]).sum())
        return total + float(np.logaddexp(odds[mixed], self._log_zero(indices, mixed)).sum())

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        """Those of the count law, weighted on inflated zeros by the chance that the count law made them."""
        found = self._every.derivatives([indices[0], *indices[2:]])
        mixed, _ = self._rows
        m, n = len(indices), len(self.response)
        of_count = [0, *range(2, m)]
        first, second = np.zeros((m, n)), np.zeros((m, m, n))
        first[of_count] = found.first
        second[np.ix_(of_count, of_count)] = found.second
        odds = indices[1]
        gap = odds[mixed] - self._log_zero(indices, mixed)
        inflated, counted = expit(gap), expit(-gap)
        both = inflated * counted
        for position, a in enumerate(of_count):
            slope_a = found.first[position, mixed]
            first[a, mixed] = counted * slope_a
            second[a, 1, mixed] = second[1, a, mixed] = -both * slope_a
            for other, b in enumerate(of_count):
                slope_b = found.first[other, mixed]
                second[a, b, mixed] = (
                    counted * found.second[position, other, mixed] + both * slope_a * slope_b
                )
        share = np.where(self.never, 0.0, expit(odds))
        first[1] = -share
        first[1, mixed] += inflated
        second[1, 1] = -share * np.where(self.never, 1.0, expit(-odds))
        second[1, 1, mixed] += both
        return IndexDerivatives(first, second)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The best end of searches from several starts, on a sample where there are many observations.

        The likelihood may have more than one maximum, so that where the search starts matters.
        """
        n = len(self.response)
        rows: Rows = even_rows(n, SAMPLE_ROWS) if n > SAMPLE_ROWS else slice(None)
        some, few = self.restricted(rows), [d[rows] for d in designs]
        objective = IndexObjective.of(some, few)
        most = MOST_STARTS if n > SAMPLE_ROWS else None
        starts = _best_first(objective, some._starts(few))[:most]
        if all(np.linalg.matrix_rank(d) == d.shape[1] for d in few):
            starts += [newton_maximise(objective, s, most=SEARCH_STEPS).point for s in starts]
        return _best_first(IndexObjective.of(self, designs), starts)[0]

    def _starts(self, designs: Sequence[Floats]) -> list[Floats]:
        """Counts from the positive flows with zeros shared out, and counts from all with little inflation."""
        positive = self.response > 0
        every = Poisson(self.response).start(designs[:1])
        seen = [designs[0][positive]]
        counts = [every]
        if positive.sum() > designs[0].shape[1] and np.linalg.matrix_rank(seen[0]) == seen[0].shape[1]:
            truncated = TruncatedPoisson(self.response[positive])
            objective = IndexObjective.of(truncated, seen)
            counts.append(newton_maximise(objective, truncated.start(seen), most=20).point)
        starts = []
        for coefficients in counts:
            for alpha in DISPERSIONS if self.dispersed else (0.0,):
                last = [np.full(1, np.log(alpha))] if self.dispersed else []
                inflation = self._inflation_start(designs, coefficients, alpha)
                starts.append(np.concatenate([coefficients, inflation, *last]))
        flat = least_squares(designs[1], np.full(len(self.response), -3.0))
        starts.append(np.concatenate([every, flat, *([np.zeros(1)] if self.dispersed else [])]))
        return starts

    def _inflation_start(self, designs: Sequence[Floats], coefficients: Floats, alpha: float) -> Floats:
        """Log odds of what the count law leaves of each zero, fitted by least squares."""
        with np.errstate(over="ignore"):
            mean = np.minimum(np.exp(designs[0] @ coefficients), 1e15)
        zero = np.exp(-np.log1p(alpha * mean) / alpha) if alpha else np.exp(-mean)
        share = float((self.response == 0).mean())
        excess = float(np.clip((share - zero.mean()) / max(1.0 - zero.mean(), 1e-9), 0.02, 0.98))
        inflated = np.where(self.response == 0, excess / (excess + (1 - excess) * zero), 0.0)
        shrunk = np.clip(0.5 * inflated + 0.5 * excess, 0.01, 0.99)
        return least_squares(designs[1], np.log(shrunk / (1 - shrunk)))
