"""Laws of counts: Poisson, negative binomial, and the geometric law of a link's weight."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np
from scipy import special

from steelyard.datasets.arrays import Floats, Integers
from steelyard.models.flow_distribution import checked_levels, checked_parameter
from steelyard.models.measure import Measure
from steelyard.models.quantiles import of_some, smallest_weight
from steelyard.models.special import (
    negative_binomial_log_mass,
    negative_binomial_log_zero,
    poisson_log_mass,
    whole_and_possible,
)
from steelyard.models.tails import negative_binomial_cdf, poisson_cdf

__all__ = ["DispersionForm", "GeometricLinkLaw", "NegativeBinomialLaw", "PoissonLaw", "draw_poisson"]

_EXACT_POISSON_DRAWS_TO = 1e10
_GAMMA_QUANTILE_TO = 1e4


def draw_poisson(rng: np.random.Generator, mean: Floats) -> Floats:
    """Poisson draws; above 1e10 a rounded normal with its skewness term, off by far less than one unit."""
    draws = rng.poisson(np.minimum(mean, _EXACT_POISSON_DRAWS_TO)).astype(np.float64)
    large = mean > _EXACT_POISSON_DRAWS_TO
    if large.any():
        z = rng.standard_normal(int(large.sum()))
        draws[large] = np.rint(mean[large] + np.sqrt(mean[large]) * z + (z * z - 1.0) / 6.0)
    return draws


def _expanded_quantile(level: Floats, mean: Floats, deviation: Floats, skewness: Floats) -> Floats:
    """Cornish-Fisher expansion to the skewness term: where the search for a quantile starts."""
    z = special.ndtri(np.clip(level, 1e-300, 1.0 - 1e-16))
    quantile: Floats = np.maximum(mean + deviation * (z + skewness * (z * z - 1.0) / 6.0), 0.0)
    return quantile


@dataclass(frozen=True, eq=False)
class PoissonLaw:
    """Poisson counts.

    Parameters
    ----------
    mean : (n,) array, finite, >= 0; a mean of 0 puts all mass on 0

    Raises
    ------
    ModelError
        if a mean is negative or not finite.
    """

    mean: Floats

    def __post_init__(self) -> None:
        object.__setattr__(self, "mean", checked_parameter("Poisson mean", self.mean, at_least=0.0))

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) probability of a count above zero."""
        return -np.expm1(-self.mean)

    @property
    def variance(self) -> Floats:
        """(n,) the mean."""
        return self.mean

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass."""
        return poisson_log_mass(weights, self.mean)

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        return poisson_cdf(weights, self.mean)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest count whose cdf reaches the level; infinite at level 1 unless the mean is 0."""
        levels = checked_levels(level, len(self.mean))
        deviation = np.sqrt(self.mean)
        skewness = 1.0 / np.maximum(deviation, 0.1)
        guess = _expanded_quantile(levels, self.mean, deviation, skewness)
        top = np.where(self.mean > 0.0, np.inf, 0.0)

        def cdf(weights: Floats, which: Integers) -> Floats:
            return poisson_cdf(weights, self.mean[which])

        return smallest_weight(cdf, levels, guess, top, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) counts."""
        return draw_poisson(rng, np.broadcast_to(self.mean, (size, len(self.mean))))


class DispersionForm(Enum):
    """How the variance of a negative binomial grows with its mean mu and dispersion alpha.

    QUADRATIC : mu + alpha mu^2, "form 2".
    LINEAR : mu (1 + alpha), "form 1".
    """

    QUADRATIC = "quadratic"
    LINEAR = "linear"


@dataclass(frozen=True, eq=False)
class NegativeBinomialLaw:
    """Negative binomial counts.

    Parameters
    ----------
    mean : (n,) array, finite, >= 0; a mean of 0 puts all mass on 0
    dispersion : (n,) array or one number, finite, >= 0; 0 is the Poisson law
    form : how the variance grows with the mean

    Raises
    ------
    ModelError
        if a mean or a dispersion is negative or not finite.
    """

    mean: Floats
    dispersion: float | Floats
    form: DispersionForm

    def __post_init__(self) -> None:
        mean = checked_parameter("Negative binomial mean", self.mean, at_least=0.0)
        dispersion = checked_parameter("Dispersion", self.dispersion, len(mean), at_least=0.0)
        object.__setattr__(self, "mean", mean)
        object.__setattr__(self, "dispersion", dispersion)

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def size(self) -> Floats:
        """(n,) size r, with variance mean + mean^2 / r; infinite where the law is Poisson."""
        numerator = self.mean if self.form is DispersionForm.LINEAR else np.ones_like(self.mean)
        size = np.full_like(self.mean, np.inf)
        with np.errstate(over="ignore"):
            np.divide(numerator, self.dispersion, out=size, where=np.asarray(self.dispersion) > 0.0)
        # a mean so small that mean / dispersion underflows leaves no mass above zero to speak of
        return np.where(self.mean > 0.0, np.maximum(size, np.finfo(np.float64).tiny), size)

    @property
    def link_probability(self) -> Floats:
        """(n,) probability of a count above zero."""
        return -np.expm1(negative_binomial_log_zero(self.mean, self.size))

    @property
    def variance(self) -> Floats:
        """(n,) mean + alpha mean^2, or mean (1 + alpha)."""
        growth = self.dispersion * self.mean if self.form is DispersionForm.QUADRATIC else self.dispersion
        return self.mean * (1.0 + growth)

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass."""
        return negative_binomial_log_mass(weights, self.mean, self.size)

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        return negative_binomial_cdf(weights, self.mean, self.size)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest count whose cdf reaches the level; infinite at level 1 unless the mean is 0."""
        levels = checked_levels(level, len(self.mean))
        top = np.where(self.mean > 0.0, np.inf, 0.0)
        size = self.size

        def cdf(weights: Floats, which: Integers) -> Floats:
            return negative_binomial_cdf(weights, self.mean[which], size[which])

        return smallest_weight(cdf, levels, self._near_quantile(levels), top, whole=True)

    def _near_quantile(self, levels: Floats) -> Floats:
        """Quantile of a gamma law with this mean and variance, or its expansion, and then one Newton step."""
        mean, variance = self.mean, self.variance
        some = np.maximum(mean, np.finfo(np.float64).tiny)
        scale = np.maximum(variance / some, 1.0)
        shape = some / scale
        deviation = np.sqrt(variance)
        skewness = (2.0 * scale - 1.0) / np.maximum(deviation, 0.1)
        guess = _expanded_quantile(levels, mean, deviation, skewness)
        few = shape < _GAMMA_QUANTILE_TO
        guess[few] = special.gammaincinv(shape[few], np.minimum(levels[few], 1.0 - 1e-16)) * scale[few]
        guess = np.floor(guess)
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            step = (levels - self.cdf(guess)) / np.exp(self.log_density(guess))
        usable = np.abs(step) < deviation
        return np.maximum(guess + np.where(usable, np.ceil(step), 0.0), 0.0)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) counts, as Poisson draws around gamma means."""
        shape = np.where(self.mean > 0.0, np.minimum(self.size, 1e100), 1.0)
        gamma = rng.standard_gamma(np.broadcast_to(shape, (size, len(shape))))
        return draw_poisson(rng, gamma * (self.mean / shape))


@dataclass(frozen=True, eq=False)
class GeometricLinkLaw:
    """Weight of a link on 1, 2, ...: y^(w - 1) (1 - y) with y = z / (1 + z), mean 1 + z.

    Parameters
    ----------
    excess : (n,) array of z, finite, >= 0: expected weight beyond the first unit; z = 0 puts all mass on 1

    Raises
    ------
    ModelError
        if an excess is negative or not finite.
    """

    excess: Floats

    def __post_init__(self) -> None:
        object.__setattr__(self, "excess", checked_parameter("Excess weight", self.excess, at_least=0.0))

    @property
    def measure(self) -> Measure:
        """Counts."""
        return Measure.COUNTS

    @property
    def link_probability(self) -> Floats:
        """(n,) ones: the law is about links."""
        return np.ones_like(self.excess)

    @property
    def mean(self) -> Floats:
        """(n,) 1 + z."""
        return 1.0 + self.excess

    @property
    def variance(self) -> Floats:
        """(n,) z (1 + z)."""
        with np.errstate(over="ignore"):
            return self.excess * (1.0 + self.excess)

    @property
    def _decay(self) -> Floats:
        """-log y: infinite where z = 0."""
        with np.errstate(divide="ignore", over="ignore"):
            near: Floats = np.log1p(1.0 / self.excess)
            return np.where(self.excess < 1.0, np.log1p(self.excess) - np.log(self.excess), near)

    def log_density(self, weights: Floats, /) -> Floats:
        """Log mass; minus infinity at 0."""
        w, penalty = whole_and_possible(weights)
        with np.errstate(invalid="ignore"):
            decayed = np.where(w > 1.0, -(w - 1.0) * self._decay, 0.0)
        return np.where(w >= 1.0, decayed - np.log1p(self.excess), -np.inf) + penalty

    def cdf(self, weights: Floats, /) -> Floats:
        """Probability of at most `weights`."""
        floor = np.floor(np.asarray(weights, dtype=np.float64))
        return np.where(floor >= 1.0, -np.expm1(-np.maximum(floor, 1.0) * self._decay), 0.0)

    def quantile(self, level: float | Floats, /) -> Floats:
        """Smallest weight whose cdf reaches the level; infinite at level 1 unless z = 0, and 0 at level 0."""
        levels = checked_levels(level, len(self.excess))
        guess = np.ceil(-np.log1p(-np.minimum(levels, 1.0 - 1e-16)) / self._decay)
        top = np.where(self.excess > 0.0, np.inf, 1.0)
        return smallest_weight(of_some(self.cdf, len(levels)), levels, guess, top, whole=True)

    def draw(self, rng: np.random.Generator, size: int, /) -> Floats:
        """(size, n) weights: an exponential draw rounded up is geometric, at any mean."""
        exponential = rng.standard_exponential((size, len(self.excess)))
        return np.maximum(np.ceil(exponential / self._decay), 1.0)
