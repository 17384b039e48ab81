"""Negative binomial counts whose variance is proportional to the mean (form 1)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import digamma, zeta

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import Poisson
from steelyard.models.special import negative_binomial_log_mass

__all__ = ["NegativeBinomialLinear"]

SERIES_FROM = 30.0


def _digamma_steps(w: Floats, size: Floats, mean: Floats) -> tuple[Floats, Floats]:
    """size (digamma(w + size) - digamma(size) - log(1 + mean / size)), and size^2 (trigamma difference).

    From the series in 1 / size where that is large: the logarithms meet in one, and nothing cancels.
    """
    both = w + size
    large = size >= SERIES_FROM
    s = np.where(large, size, SERIES_FROM)
    b = w + s
    u, v = 1.0 / s, 1.0 / b
    gap = w * u * v  # 1 / s - 1 / b
    second = gap * (u + v)
    first = np.log1p((w - mean) / (s + mean)) + gap / 2 + second / 12
    first -= (u**4 - v**4) / 120 - (u**6 - v**6) / 252
    bend = -(gap + second / 2 + (u**3 - v**3) / 6 - (u**5 - v**5) / 30 + (u**7 - v**7) / 42)
    few = ~large
    if few.any():
        x, y = both[few], size[few]
        first[few] = digamma(x) - digamma(y) - np.log1p(mean[few] / y)
        bend[few] = zeta(2.0, x) - zeta(2.0, y)
    return size * first, size**2 * bend


@dataclass(frozen=True, eq=False)
class NegativeBinomialLinear:
    """Counts with mean mu = exp(index 1) and variance mu (1 + alpha), alpha = exp(index 2), equal for all."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 0, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> NegativeBinomialLinear:
        return NegativeBinomialLinear(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The Poisson start, and the dispersion that its squared errors imply."""
        coefficients = Poisson(self.response).start(designs)
        mean = np.exp(designs[0] @ coefficients)
        alpha = float(np.mean(((self.response - mean) ** 2 - self.response) / mean))
        return np.append(coefficients, np.log(np.clip(alpha, 0.05, 1e12)))

    def value(self, indices: Sequence[Floats], /) -> float:
        mean = np.exp(indices[0])
        return float(np.sum(negative_binomial_log_mass(self.response, mean, mean * np.exp(-indices[1]))))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        w, mean, alpha = self.response, np.exp(indices[0]), np.exp(indices[1])
        by_size, bend = _digamma_steps(w, mean / alpha, mean)
        share = alpha / (1.0 + alpha)
        beside = (w - mean) / (1.0 + alpha)
        both, level = by_size + bend, mean / (1.0 + alpha)
        second = np.empty((2, 2, len(w)))
        second[0, 0] = both
        second[0, 1] = second[1, 0] = -both - level
        second[1, 1] = both + level - beside * share
        return IndexDerivatives(np.stack([by_size, beside - by_size]), second)
