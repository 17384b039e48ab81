"""Zero-truncated counts: Poisson and negative binomial given that the count is not zero."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import NegativeBinomialQuadratic, Poisson, least_squares
from steelyard.models.special import negative_binomial_log_mass, negative_binomial_log_zero

__all__ = ["TruncatedNegativeBinomial", "TruncatedPoisson"]

SMALL = 0.1
STARTS = (0.3, 1.0, 4.0, 30.0)


def _excess(mean: Floats) -> Floats:
    """mean / (1 - exp(-mean)) - 1: what truncation adds to a count's mean beyond 1; mean / 2 near 0."""
    m = np.minimum(mean, SMALL)
    s = m * m
    series = m / 2 + s * (1 / 12 - s * (1 / 720 - s * (1 / 30240 - s / 1209600)))
    far = np.maximum(mean, SMALL)
    return np.where(mean < SMALL, series, far / -np.expm1(-far) - 1.0)


@dataclass(frozen=True, eq=False)
class TruncatedPoisson:
    """Counts >= 1, Poisson with mean exp(index) but for the zeros that are not seen."""

    response: Floats

    @property
    def edges(self) -> Edges:
        # As the mean falls to 0 a count of 1 becomes certain.
        return Edges(self.response == 1, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> TruncatedPoisson:
        return TruncatedPoisson(self.response[keep])

    @cached_property
    def _untruncated(self) -> Poisson:
        return Poisson(self.response)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The untruncated start for counts less the part of them that truncation adds near 1."""
        return Poisson(self.response - np.exp(1.0 - self.response)).start(designs)

    def value(self, indices: Sequence[Floats], /) -> float:
        not_zero = np.log(-np.expm1(-np.exp(indices[0])))
        return self._untruncated.value(indices) - float(not_zero.sum())

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        mean = np.exp(indices[0])
        excess = _excess(mean)
        # The variance of a truncated count is its mean times mean - excess; near 0 both factors keep digits.
        first = (self.response - 1.0) - excess
        small = np.minimum(mean, SMALL)
        with np.errstate(over="ignore"):
            beyond = 1.0 - mean / np.expm1(np.maximum(mean, SMALL))
        rest = np.where(mean < SMALL, small - excess, beyond)
        second = -(1.0 + excess) * rest
        return IndexDerivatives(first[None, :], second[None, None, :])


def _power_sums(x: Floats) -> tuple[Floats, Floats]:
    """q - u and q - u - u^2 with q = log(1 + x) and u = x / (1 + x), as series where x is small."""
    q, u = np.log1p(x), x / (1.0 + x)
    once, twice = q - u, q - u - u**2
    near = x < 0.02
    if near.any():
        s = x[near]
        first, second = np.zeros_like(s), np.zeros_like(s)
        for k in range(9, 1, -1):
            sign = 1.0 if k % 2 == 0 else -1.0
            first = first * s + sign * (k - 1) / k
            second = second * s - sign * (k - 1) ** 2 / k
        once[near], twice[near] = first * s**2, second * s**2
    return once, twice


@dataclass(frozen=True, eq=False)
class TruncatedNegativeBinomial:
    """Counts >= 1, negative binomial (variance mu + alpha mu^2) but for the zeros that are not seen.

    Index 1 is log mu of the untruncated count, index 2 log alpha, equal for all.
    """

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 1, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> TruncatedNegativeBinomial:
        return TruncatedNegativeBinomial(self.response[keep])

    @cached_property
    def _untruncated(self) -> NegativeBinomialQuadratic:
        return NegativeBinomialQuadratic(self.response)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """A log fit of the counts, and the best of a few dispersions with the level that goes with each.

        A large dispersion goes with a low untruncated mean, since most of its mass is then on the zeros.
        """
        coefficients = least_squares(designs[0], np.log(self.response - 0.5))
        index = designs[0] @ coefficients
        best, found = -np.inf, np.append(coefficients, 0.0)
        for alpha in STARTS:
            for fall in (0.0, 1.0, 3.0):
                lowered = least_squares(designs[0], index - fall)
                with np.errstate(over="ignore"):
                    value = self.value([designs[0] @ lowered, np.full(len(index), np.log(alpha))])
                if value > best:
                    best, found = value, np.append(lowered, np.log(alpha))
        return found

    def value(self, indices: Sequence[Floats], /) -> float:
        size = float(np.exp(-indices[1][0]))
        log_zero = -size * np.log1p(np.exp(indices[0]) / size)
        return self._untruncated.value(indices) - float(np.log(-np.expm1(log_zero)).sum())

    def log_mass(self, index: Floats, log_alpha: Floats) -> float:
        """Sum of the full log masses, terms of the response alone included."""
        mean, size = np.exp(index), np.exp(-log_alpha)
        log_zero = negative_binomial_log_zero(mean, size)
        full = negative_binomial_log_mass(self.response, mean, size)
        return float(np.sum(full - np.log(-np.expm1(log_zero))))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        """Those of the untruncated law less those of log(1 - exp(-z)), z = size log(1 + mean / size)."""
        found = self._untruncated.derivatives(indices)
        mean, r = np.exp(indices[0]), float(np.exp(-indices[1][0]))
        x = mean / r
        once, twice = _power_sums(x)
        share, rest = x / (1.0 + x), 1.0 / (1.0 + x)
        z = r * np.log1p(x)
        with np.errstate(over="ignore"):
            slope = 1.0 / np.expm1(z)
        bend = -slope * (1.0 + slope)
        z_1, z_2 = mean * rest, -r * once
        first = found.first - np.stack([slope * z_1, slope * z_2])
        second = found.second.copy()
        second[0, 0] -= slope * mean * rest**2 + bend * z_1**2
        second[0, 1] -= -slope * r * share**2 + bend * z_1 * z_2
        second[1, 0] = second[0, 1]
        second[1, 1] -= slope * r * twice + bend * z_2**2
        return IndexDerivatives(first, second)
