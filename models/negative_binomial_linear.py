"""The negative binomial whose variance is a multiple of its mean (form 1)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import least_squares
from steelyard.models.size_derivatives import size_derivatives
from steelyard.models.special import negative_binomial_log_mass

__all__ = ["NegativeBinomialLinear"]


@dataclass(frozen=True, eq=False)
class NegativeBinomialLinear:
    """Counts with mean mu = exp(index 1) and variance mu (1 + alpha), alpha = exp(index 2), equal for all.

    The size is mu / alpha, so it differs from observation to observation.
    """

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 0, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> NegativeBinomialLinear:
        return NegativeBinomialLinear(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """A log fit of the smoothed counts put on the mean, and the dispersion that its squared errors imply."""
        logs = np.log(self.response + 0.5 * min(1.0, max(float(self.response.mean()), 1e-300)))
        index = designs[0] @ least_squares(designs[0], logs)
        index += np.log(max(float(self.response.mean()), 1e-300)) - np.log(np.exp(index).mean())
        mean = np.exp(index)
        alpha = float(np.mean(((self.response - mean) ** 2 - self.response) / mean))
        return np.append(least_squares(designs[0], index), np.log(np.clip(alpha, 0.05, 1e12)))

    def value(self, indices: Sequence[Floats], /) -> float:
        mean = np.exp(indices[0])
        size = np.maximum(np.exp(indices[0] - indices[1]), np.finfo(np.float64).tiny)
        return float(np.sum(negative_binomial_log_mass(self.response, mean, size)))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        """Through those in mean and size: index 1 moves both in proportion, index 2 the size alone."""
        w, mean = self.response, np.exp(indices[0])
        r = np.maximum(np.exp(indices[0] - indices[1]), np.finfo(np.float64).tiny)
        by_size, by_size_2 = size_derivatives(w, mean, r)
        share = r / (r + mean)
        step = share * (w - mean)
        by_log_size = r * by_size
        bend = by_log_size + r * (r * by_size_2)
        pull = share * mean * (w - mean) / (r + mean)
        second = np.empty((2, 2, len(w)))
        second[0, 0] = bend + pull - share * mean
        second[0, 1] = second[1, 0] = -bend - pull
        second[1, 1] = bend
        return IndexDerivatives(np.stack([step + by_log_size, -by_log_size]), second)
