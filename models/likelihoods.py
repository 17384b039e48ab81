"""The one-index and two-index likelihoods: Poisson, logit, geometric excess, negative binomial, lognormal."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import digamma, expit, polygamma

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.models.index_protocol import Edges, IndexDerivatives, Rows
from steelyard.models.size_derivatives import SERIES_FROM, nearly_poisson
from steelyard.models.special import deviance_term, log_one_plus, negative_binomial_log_mass

__all__ = [
    "GeometricExcess",
    "LogNormal",
    "Logit",
    "NegativeBinomialQuadratic",
    "Poisson",
    "least_squares",
]

LOG_ALPHAS_NEARBY = tuple(float(a) for a in range(-30, 2))
DIRECT_TO = 1000.0


def least_squares(design: Floats, values: Floats, weights: Floats | None = None) -> Floats:
    """(k,) coefficients of a (weighted) least-squares fit; used for starts and for the lognormal."""
    root = np.ones(len(values)) if weights is None else np.sqrt(weights)
    return np.asarray(np.linalg.lstsq(design * root[:, None], values * root, rcond=None)[0])


def _one_index(first: Floats, second: Floats) -> IndexDerivatives:
    return IndexDerivatives(first[None, :], second[None, None, :])


@dataclass(frozen=True, eq=False)
class Poisson:
    """Counts (or any amounts >= 0, as a pseudo-likelihood) with mean exp(index)."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 0, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> Poisson:
        return Poisson(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """Two reweighted least-squares steps from means half-way between data and average."""
        mean = 0.5 * (self.response + max(float(self.response.mean()), 1e-300))
        return least_squares(designs[0], np.log(mean) + (self.response - mean) / mean, mean)

    @cached_property
    def _few_and_many(self) -> tuple[Floats, Bools]:
        """Responses with 0 in place of large ones, and which are large."""
        many = self.response > DIRECT_TO
        return np.where(many, 0.0, self.response), many

    def value(self, indices: Sequence[Floats], /) -> float:
        index = indices[0]
        mean = np.exp(index)
        few, many = self._few_and_many
        # Half the deviance keeps its digits at weights of 1e12; where the weights are small, w index - mean is as
        # good, and quicker.
        large = deviance_term(self.response[many], mean[many]) - mean[many]
        return float(few @ index - mean.sum() - large.sum())

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        mean = np.exp(indices[0])
        return _one_index(self.response - mean, -mean)


@dataclass(frozen=True, eq=False)
class Logit:
    """Links 0 or 1 with log odds equal to the index."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 0, self.response == 1)

    def restricted(self, keep: Rows, /) -> Logit:
        return Logit(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The least-squares fit of log odds shrunk to a quarter of the way."""
        share = np.clip(0.25 * self.response + 0.75 * self.response.mean(), 1e-12, 1 - 1e-12)
        return least_squares(designs[0], np.log(share) - np.log1p(-share))

    def value(self, indices: Sequence[Floats], /) -> float:
        # Log probability of what was seen, without cancellation at either end.
        signed = np.where(self.response == 1, indices[0], -indices[0])
        return float(-np.sum(np.logaddexp(0.0, -signed)))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        probability, rest = expit(indices[0]), expit(-indices[0])
        # 1 - p as such would round to 0 at an index of 37, and a separated fit would seem to stand still.
        return _one_index(np.where(self.response == 1, rest, -probability), -probability * rest)


@dataclass(frozen=True, eq=False)
class GeometricExcess:
    """Counts >= 1 whose excess over 1 is geometric with mean exp(index)."""

    response: Floats

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 1, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> GeometricExcess:
        return GeometricExcess(self.response[keep])

    def start(self, designs: Sequence[Floats], /) -> Floats:
        return least_squares(designs[0], np.log(self.response - 0.5))

    def value(self, indices: Sequence[Floats], /) -> float:
        index = indices[0]
        # (w - 1) log y + log(1 - y), each logarithm without cancellation.
        return float(-np.sum((self.response - 1) * np.logaddexp(0, -index) + np.logaddexp(0, index)))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        y, rest = expit(indices[0]), expit(-indices[0])
        return _one_index((self.response - 1) * rest - y, -self.response * y * rest)


def _beside_mean(values: Floats, r: float) -> Floats:
    """(v,) the log mass less w log(mean / r) - (w + r) log(1 + mean / r), for distinct responses.

    Those are the parts that hold the mean; the rest is read off the exact mass at mean = response, where it has no
    large terms.
    """
    at = np.maximum(values, 1.0)
    with_mean = values * np.log(at / r) - (values + r) * np.log1p(at / r)
    return negative_binomial_log_mass(values, at, np.full(len(values), r)) - with_mean


@dataclass(frozen=True, eq=False)
class NegativeBinomialQuadratic:
    """Counts with mean mu = exp(index 1) and variance mu + alpha mu^2, alpha = exp(index 2), equal for all.

    Parameters
    ----------
    response : (n,) counts
    near : (n,) a first index from which to start, such as that of the Poisson where alpha is tiny
    """

    response: Floats
    near: Floats | None = None

    @property
    def edges(self) -> Edges:
        return Edges(self.response == 0, np.zeros(len(self.response), dtype=bool))

    def restricted(self, keep: Rows, /) -> NegativeBinomialQuadratic:
        near = None if self.near is None else self.near[keep]
        return NegativeBinomialQuadratic(self.response[keep], near)

    @cached_property
    def _distinct(self) -> tuple[Floats, Integers]:
        """Distinct responses, and where each observation's stands among them."""
        values, inverse = np.unique(self.response, return_inverse=True)
        return values, inverse

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """A log fit of the smoothed counts, and the dispersion that its squared relative errors imply.

        From an index given beside the counts, the likelihood itself says which dispersion suits it.
        """
        if self.near is not None:
            near, ones = self.near, np.ones_like(self.near)
            log_alpha = max(LOG_ALPHAS_NEARBY, key=lambda a: self.value([near, a * ones]))
            return np.append(least_squares(designs[0], near), log_alpha)
        logs = np.log(self.response + 0.5 * min(1.0, max(float(self.response.mean()), 1e-300)))
        coefficients = least_squares(designs[0], logs)
        index = designs[0] @ coefficients
        index += np.log(max(float(self.response.mean()), 1e-300)) - np.log(np.exp(index).mean())
        mean = np.exp(index)
        alpha = float(np.mean(((self.response - mean) ** 2 - self.response) / mean**2))
        coefficients = least_squares(designs[0], index)
        return np.append(coefficients, np.log(np.clip(alpha, 0.05, 20.0)))

    @cached_property
    def _few_and_many(self) -> tuple[Floats, Floats, Bools]:
        """Responses with 0 in place of large ones, 1 where they are not large, and which are."""
        many = self.response > DIRECT_TO
        return np.where(many, 0.0, self.response), (~many).astype(np.float64), many

    def value(self, indices: Sequence[Floats], /) -> float:
        index, size = indices[0], float(np.exp(-indices[1][0]))
        mean = np.exp(index)
        if not 1e-8 < size < 1e12:
            return float(np.sum(negative_binomial_log_mass(self.response, mean, np.full_like(mean, size))))
        # The sum of w log(mean) terms is quick, and good where w is small; at weights of 1e9 it would lose what
        # the line search must see.
        few, are_few, many = self._few_and_many
        values, counts = self._distinct_few
        beyond = log_one_plus(mean / size)
        total = float(counts @ _beside_mean(values, size))
        total += float(few @ index - np.log(size) * few.sum() - few @ beyond - size * (are_few @ beyond))
        if many.any():
            large = negative_binomial_log_mass(
                self.response[many], mean[many], np.full(int(many.sum()), size)
            )
            total += float(large.sum())
        return total

    @cached_property
    def _distinct_few(self) -> tuple[Floats, Floats]:
        """Distinct small responses, and how often each occurs."""
        values, counts = np.unique(self.response[~self._few_and_many[2]], return_counts=True)
        return values, counts.astype(np.float64)

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        w, mean, r = self.response, np.exp(indices[0]), float(np.exp(-indices[1][0]))
        total = r + mean
        share, rest = mean / total, r / total
        by_mean = rest * (w - mean)
        if r < SERIES_FROM:
            values, inverse = self._distinct
            psi = r * (digamma(values + r) - digamma(r))
            psi_1 = r**2 * (polygamma(1, values + r) - polygamma(1, r))
            by_size = psi[inverse] - r * log_one_plus(mean / r) - by_mean
            curvature = psi_1[inverse] + r * share + rest * by_mean
        else:
            first, second = nearly_poisson(w, mean, r)
            by_size, curvature = r * first, r**2 * second
        both = np.empty((2, 2, len(w)))
        both[0, 0] = -share * rest * (r + w)
        both[0, 1] = both[1, 0] = -share * by_mean
        both[1, 1] = by_size + curvature
        return IndexDerivatives(np.stack([by_mean, -by_size]), both)


@dataclass(frozen=True, eq=False)
class LogNormal:
    """Positive amounts whose log is normal with mean index 1 and log standard deviation index 2."""

    response: Floats

    @property
    def edges(self) -> Edges:
        none = np.zeros(len(self.response), dtype=bool)
        return Edges(none, none)

    def restricted(self, keep: Rows, /) -> LogNormal:
        return LogNormal(self.response[keep])

    @cached_property
    def _log_response(self) -> Floats:
        return np.log(self.response)

    def start(self, designs: Sequence[Floats], /) -> Floats:
        """The maximum itself: least squares, and the root mean squared residual."""
        coefficients = least_squares(designs[0], self._log_response)
        residual = self._log_response - designs[0] @ coefficients
        return np.append(coefficients, 0.5 * np.log(np.mean(residual**2)))

    def value(self, indices: Sequence[Floats], /) -> float:
        z = (self._log_response - indices[0]) * np.exp(-indices[1])
        return float(-np.sum(indices[1] + 0.5 * z**2))

    def derivatives(self, indices: Sequence[Floats], /) -> IndexDerivatives:
        precision = np.exp(-indices[1])
        z = (self._log_response - indices[0]) * precision
        second = np.empty((2, 2, len(z)))
        second[0, 0] = -(precision**2)
        second[0, 1] = second[1, 0] = -2 * z * precision
        second[1, 1] = -2 * z**2
        return IndexDerivatives(np.stack([z * precision, z**2 - 1.0]), second)
