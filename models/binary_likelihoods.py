"""Probit: links whose probability is a normal distribution function of the index."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import erfcx, log_ndtr, ndtri

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import least_squares

__all__ = ["Probit", "mills_ratio"]

_SERIES_BELOW = -20.0


def mills_ratio(z: Floats) -> tuple[Floats, Floats]:
    """Return phi(z) / Phi(z) and phi(z) / Phi(z) + z, both without cancellation or underflow below zero.

    Parameters
    ----------
    z : (n,) array

    Notes
    -----
    Phi(z) / phi(z) = sqrt(pi / 2) erfcx(-z / sqrt(2)). The sum with z is of order 1 / |z| far below zero, where
    the asymptotic series 1 - |z| Phi / phi = 1 / z^2 - 3 / z^4 + 15 / z^6 - ... takes its place.
    """
    with np.errstate(over="ignore"):
        # Above an index of 37 the scaled function overflows, and the ratio is 0 to all digits.
        ratio = 1.0 / (np.sqrt(0.5 * np.pi) * erfcx(-z * np.sqrt(0.5)))
    rest = ratio + z
    far = z < _SERIES_BELOW
    if far.any():
        square = 1.0 / np.square(z[far])
        total = np.zeros_like(square)
        for k in range(10, 0, -1):
            total = square * (2 * k - 1) * (1.0 - total)
        rest[far] = ratio[far] * total
    return ratio, rest


@dataclass(frozen=True, eq=False)
class Probit:
    """Links 0 or 1 with probability Phi(index)."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 0, self.response == 1)

    def restricted(self, keep: Rows, /) -> Probit:
        return Probit(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The least-squares fit of normal quantiles of links shrunk to a quarter of the way."""
        share = np.clip(0.25 * self.response + 0.75 * self.response.mean(), 1e-12, 1 - 1e-12)
        return least_squares(designs[0], ndtri(share))

    def _signed(self, index: Floats) -> tuple[Floats, Floats]:
        sign = np.where(self.response == 1, 1.0, -1.0)
        return sign, sign * index

    def value(self, indices: Sequence[Floats], /) -> float:
        return float(np.sum(log_ndtr(self._signed(indices[0])[1])))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        sign, signed = self._signed(indices[0])
        ratio, rest = mills_ratio(signed)
        return IndexDerivatives((sign * ratio)[None, :], -(ratio * rest)[None, None, :])
