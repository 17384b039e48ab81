"""Gamma amounts with a log-linear mean and one dispersion."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import digamma, logsumexp, polygamma

from steelyard.datasets.arrays import Floats
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.likelihoods import Poisson, least_squares
from steelyard.models.special import deviance_term, stirling_error

__all__ = ["Gamma", "gamma_shape_terms"]

_SERIES_FROM = 20.0


def gamma_shape_terms(shape: float) -> tuple[float, float]:
    """Return a g(a) and a g(a) + a^2 g'(a), where g(a) = log a - digamma(a), for a shape a > 0.

    Large shapes take the series of the digamma function, in which log a has cancelled: the first tends to 1/2 and
    the second to -1 / (12 a).
    """
    a = shape
    if a < _SERIES_FROM:
        first = a * (np.log(a) - float(digamma(a)))
        return float(first), float(first + a - a * a * float(polygamma(1, a)))
    v = 1.0 / a
    s = v * v
    first = 0.5 + v * (1 / 12 - s * (1 / 120 - s * (1 / 252 - s * (1 / 240 - s / 132))))
    second = -v * (1 / 12 - s * (1 / 40 - s * (5 / 252 - s * (7 / 240 - s * 9 / 132))))
    return first, second


@dataclass(frozen=True, eq=False)
class Gamma:
    """Positive amounts with mean exp(index 1) and variance alpha mean^2, alpha = exp(index 2), equal for all.

    With the shape a = 1 / alpha, the log density is log(a / 2 pi) / 2 - E(a) - a d - log w, where E is the error of
    Stirling's formula and d = w / mean - 1 - log(w / mean).
    """

    response: Floats

    @property
    def edges(self) -> Edges:
        none = np.zeros(len(self.response), dtype=bool)
        return Edges(none, none)

    def restricted(self, keep: Rows, /) -> Gamma:
        return Gamma(self.response[keep])

    @cached_property
    def _log_response(self) -> Floats:
        return np.log(self.response)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The better of a log fit and a Poisson start, put on the mean, each with the shape that suits it.

        The shape solves its equation log a - digamma(a) = mean deviance to about one per cent.
        """
        logs = self._log_response
        scaled = Poisson(self.response * np.exp(-logs.max()))
        best, start = -np.inf, None
        for coefficients in (least_squares(designs[0], logs), scaled.start(designs[:1])):
            index = designs[0] @ coefficients
            index += logsumexp(logs - index) - np.log(len(logs))
            deviance = max(float(np.mean(index - logs)), 1e-18)
            shape = (3 - deviance + np.sqrt((deviance - 3) ** 2 + 24 * deviance)) / (12 * deviance)
            coefficients = least_squares(designs[0], index)
            value = self.value([designs[0] @ coefficients, np.full(len(logs), -np.log(shape))])
            if start is None or value > best:
                best, start = value, np.append(coefficients, -np.log(shape))
        assert start is not None
        return start

    def _deviance(self, index: Floats) -> tuple[Floats, Floats]:
        """(n,) of log(w / mean), and of d."""
        gap = self._log_response - index
        with np.errstate(over="ignore"):
            return gap, deviance_term(np.ones_like(gap), np.exp(gap))

    def value(self, indices: Sequence[Floats], /) -> float:
        shape = np.exp(-indices[1][0])
        deviance = self._deviance(indices[0])[1]
        constant = 0.5 * np.log(shape) - float(stirling_error(np.array([shape]))[0])
        return float(len(deviance) * constant - shape * np.sum(deviance))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        shape = float(np.exp(-indices[1][0]))
        gap, deviance = self._deviance(indices[0])
        first_term, second_term = gamma_shape_terms(shape)
        with np.errstate(over="ignore"):
            excess = shape * np.expm1(gap)
        second = np.empty((2, 2, len(gap)))
        second[0, 0] = -(excess + shape)
        second[0, 1] = second[1, 0] = -excess
        second[1, 1] = second_term - shape * deviance
        return IndexDerivatives(np.stack([excess, shape * deviance - first_term]), second)
