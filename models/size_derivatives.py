"""Derivatives of the negative binomial log mass in its size, for small sizes and for nearly Poisson ones."""

from __future__ import annotations

import numpy as np
from scipy.special import digamma, polygamma

from steelyard.datasets.arrays import Floats
from steelyard.models.special import deviance_term

__all__ = ["SERIES_FROM", "nearly_poisson", "size_derivatives"]

SERIES_FROM = 100.0


def nearly_poisson(w: Floats, mean: Floats, r: float | Floats) -> tuple[Floats, Floats]:
    """First and second derivative of the log mass in a large size r, without differences of nearly equal terms.

    The logarithms of the digamma series meet log(1 + mean / r) in log(1 + t) - t, t = (w - mean) / (r + mean).
    """
    both, total = w + r, mean + r
    t = (w - mean) / total
    gap = [(1 / r) ** k - (1 / both) ** k for k in range(8)]
    first = w / (2 * r * both) - deviance_term(np.ones_like(t), both / total)
    first += gap[2] / 12 - gap[4] / 120 + gap[6] / 252
    tails = -(gap[2] / 2 + gap[3] / 6 - gap[5] / 30 + gap[7] / 42)
    return first, t**2 / both + tails


def size_derivatives(w: Floats, mean: Floats, r: Floats) -> tuple[Floats, Floats]:
    """First and second derivative of the log mass in the size, each observation having a size of its own.

    Parameters
    ----------
    w, mean, r : (n,) counts, means and sizes, the last two above 0
    """
    first, second = np.empty_like(mean), np.empty_like(mean)
    large = r >= SERIES_FROM
    first[large], second[large] = nearly_poisson(w[large], mean[large], r[large])
    few = ~large
    count, m, size = w[few], mean[few], r[few]
    total = size + m
    t = (count - m) / total
    psi, psi_1 = np.zeros_like(count), np.zeros_like(count)
    some = count > 0.0  # both differences vanish at a count of 0
    psi[some] = digamma(count[some] + size[some]) - digamma(size[some])
    psi_1[some] = polygamma(1, count[some] + size[some]) - polygamma(1, size[some])
    first[few] = psi - np.log1p(m / size) - t
    second[few] = psi_1 + m / (size * total) + t / total
    return first, second
