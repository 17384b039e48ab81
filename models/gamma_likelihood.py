"""The gamma likelihood of positive amounts, with its shape estimated beside the mean."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import digamma, polygamma

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import least_squares
from steelyard.models.special import stirling_error

__all__ = ["GammaAmounts"]

SERIES_FROM = 100.0


def _log_minus_digamma(shape: Floats) -> tuple[Floats, Floats]:
    """c = log k - digamma(k), and c + k c' with c' its derivative, for shapes k > 0.

    Both are differences of nearly equal terms where k is large, and there are summed as series in 1 / k.
    """
    small = np.minimum(shape, SERIES_FROM)
    c = np.log(small) - digamma(small)
    beyond = c + 1.0 - small * polygamma(1, small)
    u = 1.0 / np.maximum(shape, SERIES_FROM)
    s = u * u
    c_series = u / 2 + s * (1 / 12 - s * (1 / 120 - s / 252))
    beyond_series = s * (-1 / 12 + s * (1 / 40 - s * 5 / 252))
    large = shape > SERIES_FROM
    return np.where(large, c_series, c), np.where(large, beyond_series, beyond)


@dataclass(frozen=True, eq=False)
class GammaAmounts:
    """Positive amounts with mean exp(index 1) and variance alpha mean^2, alpha = exp(index 2) = 1 / shape.

    With t = log(w / mean) and D = exp(t) - 1 - t, the log density is -shape D + log(shape) / 2 - S(shape) up to
    terms of w alone, S being the error of Stirling's formula.
    """

    response: Floats

    @property
    def edges(self) -> Edges:
        none = np.zeros(len(self.response), dtype=bool)
        return Edges(none, none)

    def restricted(self, keep: Rows, /) -> GammaAmounts:
        return GammaAmounts(self.response[keep])

    @cached_property
    def _log_response(self) -> Floats:
        return np.log(self.response)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """Least squares of logs raised to the mean, and the shape that its D have on average."""
        coefficients = least_squares(designs[0], self._log_response)
        residual = self._log_response - designs[0] @ coefficients
        top = float(residual.max())
        raised = top + np.log(np.mean(np.exp(residual - top)))
        coefficients = least_squares(designs[0], designs[0] @ coefficients + raised)
        gap = float(np.mean(-(residual - raised)))
        gap = max(gap, 1e-12)
        # Closed approximation of the maximum in the shape where mean w / mean = 1 (Minka 2002).
        shape = (3.0 - gap + np.sqrt((gap - 3.0) ** 2 + 24.0 * gap)) / (12.0 * gap)
        return np.append(coefficients, -np.log(shape))

    def _gap(self, index: Floats) -> tuple[Floats, Floats]:
        """exp(t) - 1 and D."""
        t = self._log_response - index
        rise = np.expm1(t)
        near = np.abs(t) < 0.03
        series = t * t * (1 / 2 + t * (1 / 6 + t * (1 / 24 + t * (1 / 120 + t * (1 / 720 + t / 5040)))))
        return rise, np.where(near, series, rise - t)

    def value(self, indices: Sequence[Floats], /) -> float:
        shape = np.exp(-indices[1])
        _, gap = self._gap(indices[0])
        # The second index is a constant, so that one error of Stirling's formula serves all.
        one = shape[:1]
        beside = float((0.5 * np.log(one) - stirling_error(one))[0])
        return float(-(shape @ gap)) + len(shape) * beside

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        shape = np.exp(-indices[1])
        rise, gap = self._gap(indices[0])
        c, beyond = (values[0] for values in _log_minus_digamma(shape[:1]))
        second = np.empty((2, 2, len(gap)))
        second[0, 0] = -shape * (1.0 + rise)
        second[0, 1] = second[1, 0] = -shape * rise
        second[1, 1] = shape * (beyond - gap)
        return IndexDerivatives(np.stack([shape * rise, shape * (gap - c)]), second)
