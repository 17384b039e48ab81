"""The probit likelihood, with its ratio of density to probability exact in both tails."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import erfcx, log_ndtr, ndtri

from steelyard.datasets.arrays import Bools, Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import least_squares

__all__ = ["Probit", "density_over_probability"]

ROOT_TWO_OVER_PI = 0.7978845608028654
ASYMPTOTIC_BELOW = -40.0


def density_over_probability(t: Floats, /) -> tuple[Floats, Floats]:
    """The ratio h(t) = phi(t) / Phi(t) of the standard normal, and h(t) + t, both without cancellation.

    Far to the left h(t) approaches -t, and the sum is what is left: 1/x - 2/x^3 + 10/x^5 - ... with x = -t.
    """
    with np.errstate(over="ignore"):
        # The scaled complementary error function overflows where the ratio is 0 to all digits.
        ratio = ROOT_TWO_OVER_PI / erfcx(-t / np.sqrt(2.0))
    beyond = ratio + t
    far = t < ASYMPTOTIC_BELOW
    if far.any():
        x = -t[far]
        s = 1.0 / x**2
        beyond[far] = (1.0 - s * (2.0 - s * (10.0 - s * (74.0 - s * 706.0)))) / x
    return ratio, beyond


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
        """The least-squares fit of normal quantiles shrunk to a quarter of the way."""
        share = np.clip(0.25 * self.response + 0.75 * self.response.mean(), 1e-12, 1 - 1e-12)
        return least_squares(designs[0], ndtri(share))

    def _signed(self, index: Floats) -> tuple[Floats, Bools]:
        link = self.response == 1
        return np.where(link, index, -index), link

    def value(self, indices: Sequence[Floats], /) -> float:
        return float(np.sum(log_ndtr(self._signed(indices[0])[0])))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        signed, link = self._signed(indices[0])
        ratio, beyond = density_over_probability(signed)
        return IndexDerivatives(np.where(link, ratio, -ratio)[None, :], (-ratio * beyond)[None, None, :])
