"""Counts of observed links: zero-truncated Poisson and negative binomial, and the logarithmic series between them.

The negative binomial of all counts has variance mu + alpha mu^2. Truncated at zero it has two edges: alpha = 0 is the
truncated Poisson; and as alpha grows while alpha mu tends to some z it becomes the logarithmic series in z / (1 + z).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import product

import numpy as np
from scipy.special import expit, gammaln, lambertw

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import NegativeBinomialQuadratic, least_squares
from steelyard.models.special import deviance_term, poisson_log_mass
from steelyard.models.truncated_mass import (
    log_series_log_mass,
    log_series_mean_excess,
    truncated_log_mass,
)

__all__ = ["LogarithmicSeries", "TruncatedNegativeBinomial", "TruncatedPoisson", "truncated_poisson_excess"]

_SERIES_BELOW = 0.1
_MOST_FOR_START = 2_000
_SHIFTS = (1.0, 0.0, -1.0, -3.0, -6.0)
_LOG_ALPHAS = (-4.0, -2.0, -0.5, 0.5, 1.5, 3.0, 6.0)
_LOG_ALPHAS_NEARBY = tuple(float(a) for a in range(-30, 2))


def truncated_poisson_excess(mean: Floats) -> Floats:
    """mean / (1 - exp(-mean)) - 1 for means >= 0: how far the truncated mean lies above one."""
    excess = np.empty_like(mean)
    small = mean < _SERIES_BELOW
    m = mean[small]
    s = m * m
    excess[small] = 0.5 * m + s * (1 / 12 - s * (1 / 720 - s * (1 / 30240 - s / 1209600)))
    m = mean[~small]
    excess[~small] = (m + np.expm1(-m)) / -np.expm1(-m)
    return excess


def _ones_are_lowest(response: Floats) -> Edges:
    return Edges(response == 1, np.zeros(len(response), dtype=bool))


@dataclass(frozen=True, eq=False)
class TruncatedPoisson:
    """Counts >= 1: Poisson with mean exp(index), given that it is not zero."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return _ones_are_lowest(self.response)

    def restricted(self, keep: Rows, /) -> TruncatedPoisson:
        return TruncatedPoisson(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """Weighted least squares around the means that truncation turns into half-way between data and average."""
        truncated = np.maximum(0.5 * (self.response + self.response.mean()), 1.0 + 1e-9)
        # mean = truncated (1 - exp(-mean)), solved by Lambert's function
        bent = np.where(truncated < 700.0, -truncated * np.exp(-np.minimum(truncated, 700.0)), 0.0)
        mean = np.maximum(truncated + np.real(lambertw(bent)), 1e-9)
        spread = truncated * (mean - truncated_poisson_excess(mean))
        return least_squares(designs[0], np.log(mean) + (self.response - truncated) / spread, spread)

    def value(self, indices: Sequence[Floats], /) -> float:
        w, index = self.response, indices[0]
        mean = np.exp(index)
        few = mean < 1.0
        log_mass = np.empty_like(mean)
        m = mean[few]
        # Near zero the logarithms of the mean and of the link probability have cancelled in (exp(m) - 1) / m.
        ratio = np.where(m > 0.0, np.expm1(m) / np.where(m > 0.0, m, 1.0), 1.0)
        log_mass[few] = (w[few] - 1.0) * index[few] - gammaln(w[few] + 1.0) - np.log(ratio)
        m = mean[~few]
        log_mass[~few] = poisson_log_mass(w[~few], m) - np.log(-np.expm1(-m))
        return float(np.sum(log_mass))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        mean = np.exp(indices[0])
        excess = truncated_poisson_excess(mean)
        first = (self.response - 1.0) - excess
        return IndexDerivatives(first[None, :], -((1.0 + excess) * (mean - excess))[None, None, :])


@dataclass(frozen=True, eq=False)
class LogarithmicSeries:
    """Counts >= 1 with probability p^w / (w log(1 + z)), p = z / (1 + z), log z the index."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return _ones_are_lowest(self.response)

    def restricted(self, keep: Rows, /) -> LogarithmicSeries:
        return LogarithmicSeries(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """Constant or log fit, moved and stretched to the best of a few."""
        logs = np.log(self.response)
        fitted = least_squares(designs[0], logs)
        index = designs[0] @ fitted
        tried = [
            least_squares(designs[0], stretch * (index - index.mean()) + index.mean() + shift)
            for stretch, shift in product((0.0, 1.0, 1.5), (-2.0, 0.0, 2.0, 4.0, 8.0))
        ]
        return max(tried, key=lambda c: self.value([designs[0] @ c]))

    def value(self, indices: Sequence[Floats], /) -> float:
        return float(np.sum(log_series_log_mass(self.response, indices[0])))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        index = indices[0]
        p, rest = expit(index), expit(-index)
        excess = log_series_mean_excess(np.minimum(index, 700.0))
        gap = rest * excess
        # p / log(1 + z), the mean times 1 - p.
        share = rest + gap
        first = rest * (self.response - 1.0) - gap
        return IndexDerivatives(first[None, :], (share * gap - self.response * p * rest)[None, None, :])


@dataclass(frozen=True, eq=False)
class TruncatedNegativeBinomial:
    """Counts >= 1: negative binomial with mean exp(index 1) and alpha = exp(index 2), given that it is not zero.

    Parameters
    ----------
    response : (n,) counts
    near : (n,) a first index near which the maximum may lie, such as that of the truncated Poisson
    """

    response: Floats
    near: Floats | None = None

    @property
    def edges(self) -> Edges:
        return _ones_are_lowest(self.response)

    def restricted(self, keep: Rows, /) -> TruncatedNegativeBinomial:
        return TruncatedNegativeBinomial(self.response[keep], None if self.near is None else self.near[keep])

    @cached_property
    def _untruncated(self) -> NegativeBinomialQuadratic:
        return NegativeBinomialQuadratic(self.response)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The most likely of a few: a log fit, lowered by several amounts, and the index nearby.

        The lower the untruncated mean, the more zeros were cut off; where alpha is large that is nearly all.
        Large and nearly Poisson counts need the index nearby, for there alpha may be anything down to 1 / mean.
        """
        index = designs[0] @ least_squares(designs[0], np.log(self.response))
        grid = [(index + shift, a) for shift, a in product(_SHIFTS, _LOG_ALPHAS)]
        if self.near is not None:
            grid += [(self.near, a) for a in _LOG_ALPHAS_NEARBY]
        some = slice(None, None, max(1, len(index) // _MOST_FOR_START))
        part = TruncatedNegativeBinomial(self.response[some])
        ones = np.ones_like(index[some])
        best, log_alpha = max(grid, key=lambda pair: part.value([pair[0][some], pair[1] * ones]))
        return np.append(least_squares(designs[0], best), log_alpha)

    def value(self, indices: Sequence[Floats], /) -> float:
        size = np.exp(-indices[1])
        return float(np.sum(truncated_log_mass(self.response, np.exp(indices[0]), size)))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        """Those of the untruncated law, less those of log(1 - exp(-c)), c = r log(1 + mean / r) = -log P(0)."""
        found = self._untruncated.derivatives(indices)
        mean, r = np.exp(indices[0]), float(np.exp(-indices[1][0]))
        share = r / (r + mean)
        by_index = mean * share
        lost = r * deviance_term(np.ones_like(mean), share)  # c less its slope in the index
        c = r * np.log1p(mean / r)
        by_both = -by_index * mean / (r + mean)
        slope = np.stack([by_index, -lost])
        bend = np.array([[by_index * share, by_both], [by_both, lost + by_both]])
        with np.errstate(over="ignore"):
            q = 1.0 / np.expm1(c)
        first = found.first - q * slope
        # q (1 + q) times the outer product of the slopes, in two parts that neither overflow nor lose symmetry.
        one, other = q * slope, np.sqrt(q) * slope
        second = found.second + one[:, None] * one[None, :] + other[:, None] * other[None, :] - q * bend
        return IndexDerivatives(first, second)
