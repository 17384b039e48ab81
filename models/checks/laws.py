"""Checks of distributions: identities that hold for any law, on the dyads of the example."""

from __future__ import annotations

from itertools import pairwise
from typing import cast

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.checks.broken import require
from steelyard.models.checks.example import ExampleFlows
from steelyard.models.contract import Law, Model, Part
from steelyard.models.distributions import FlowDistribution
from steelyard.models.measure import Measure

__all__ = [
    "density_integrates_to_the_cdf",
    "draws_have_the_stated_mean",
    "impossible_flows_are_impossible",
    "mass_adds_up_to_the_cdf",
    "mean_is_the_expected_weight",
    "probabilities_are_probabilities",
    "quantiles_invert_the_cdf",
    "subset_scores_as_in_whole",
    "unit_shifts_the_density",
    "weights_are_given_a_link",
    "zero_has_the_rest_of_the_link_probability",
]

LEVELS = (0.1, 0.5, 0.9, 0.99)


def _law(model: Model, dyads: Dyads) -> FlowDistribution:
    return cast(Law, model.fit(dyads)).distribution(dyads)


def _observed(model: Model, dyads: Dyads) -> Floats:
    """What the model's measure observes on these dyads; weights models are asked about positive flows only."""
    if model.measure is Measure.LINKS:
        return dyads.links.astype(np.float64)
    flows = dyads.counts if model.measure is Measure.COUNTS else dyads.weights
    return np.maximum(flows, 1.0) if model.part is Part.WEIGHTS else flows


def probabilities_are_probabilities(model: Model, flows: ExampleFlows) -> None:
    """Link probabilities lie in [0, 1]; means and variances are >= 0 and never nan; so are log densities."""
    dyads = flows.dyads
    law = _law(model, dyads)
    p = law.link_probability
    require(((p >= 0) & (p <= 1)).all(), f"{model.name}: a link probability outside [0, 1]")
    require((law.mean >= 0).all() and (law.variance >= 0).all(), f"{model.name}: a negative or nan moment")
    require(
        not np.isnan(law.log_density(_observed(model, dyads))).any(), f"{model.name}: a log density is nan"
    )
    require(law.measure is model.measure, f"{model.name}: the law's measure is not the declared one")


def impossible_flows_are_impossible(model: Model, flows: ExampleFlows) -> None:
    """Negative flows, and fractions of a count, have log density minus infinity."""
    law, n = _law(model, flows.dyads), len(flows.dyads)
    require(
        np.isneginf(law.log_density(np.full(n, -1.0))).all(), f"{model.name}: a negative flow is possible"
    )
    if model.measure is not Measure.AMOUNTS:
        require(
            np.isneginf(law.log_density(np.full(n, 0.5))).all(), f"{model.name}: half a count is possible"
        )


def subset_scores_as_in_whole(model: Model, flows: ExampleFlows) -> None:
    """A dyad scores the same alone, in a subset and in the whole."""
    dyads = flows.dyads
    mask = flows.training_mask()
    subset = dyads.select(mask)
    fitted = cast(Law, model.fit(dyads))
    whole = fitted.distribution(dyads).log_density(_observed(model, dyads))
    part = fitted.distribution(subset).log_density(_observed(model, subset))
    inside = mask[dyads.origin, dyads.destination]
    require(
        np.allclose(whole[inside], part, rtol=1e-12), f"{model.name}: a dyad scores differently in a subset"
    )


def quantiles_invert_the_cdf(model: Model, flows: ExampleFlows) -> None:
    """The quantile is the smallest flow whose cdf reaches the level."""
    law = _law(model, flows.dyads)
    for level in LEVELS:
        quantile = law.quantile(level)
        require(
            (law.cdf(quantile) >= level * (1 - 1e-9)).all(), f"{model.name}: cdf(quantile) < level {level}"
        )
        step = 1.0 if model.measure is not Measure.AMOUNTS else 1e-6 * quantile
        below = np.where(quantile > 0, quantile - step, quantile)
        lower = (law.cdf(below) < level * (1 + 1e-9)) | (quantile == 0)
        require(lower.all(), f"{model.name}: a smaller flow than the quantile reaches level {level}")


def draws_have_the_stated_mean(model: Model, flows: ExampleFlows) -> None:
    """The average of many draws lies within five standard errors of the mean, dyad by dyad."""
    law = _law(model, flows.dyads)
    size = 4000
    draws = law.draw(np.random.default_rng(1), size)
    require(draws.shape == (size, len(flows.dyads)), f"{model.name}: draws must have shape (size, n)")
    error = np.sqrt(law.variance / size)
    # Heavy tails make the normal limit slow: six standard errors, and the sampled spread as a second judge.
    error = np.maximum(error, draws.std(axis=0) / np.sqrt(size))
    off = np.abs(draws.mean(axis=0) - law.mean) / np.maximum(error, 1e-12)
    require(off.max() < 6.0, f"{model.name}: draws miss the stated mean by {off.max():.1f} standard errors")


def mean_is_the_expected_weight(model: Model, flows: ExampleFlows) -> None:
    """`expected_weight` and the mean of the distribution are one thing."""
    dyads = flows.dyads
    fitted = cast(Law, model.fit(dyads))
    same = np.allclose(fitted.expected_weight(dyads), fitted.distribution(dyads).mean, rtol=1e-9)
    require(same, f"{model.name}: expected_weight differs from the distribution's mean")


def mass_adds_up_to_the_cdf(model: Model, flows: ExampleFlows) -> None:
    """Summed probabilities of 0, 1, 2, ... are the cdf, and the cdf tends to one."""
    law, n = _law(model, flows.dyads), len(flows.dyads)
    top = 1 if model.measure is Measure.LINKS else 400
    total = np.zeros(n)
    for count in range(top + 1):
        total += np.exp(law.log_density(np.full(n, float(count))))
    require(
        np.allclose(total, law.cdf(np.full(n, float(top))), rtol=1e-9), f"{model.name}: mass is not the cdf"
    )
    require(np.allclose(law.cdf(np.full(n, 1e15)), 1.0), f"{model.name}: the cdf does not tend to one")


def density_integrates_to_the_cdf(model: Model, flows: ExampleFlows) -> None:
    """The density in w integrates to the cdf; a density scored on log w without its Jacobian does not."""
    law, n = _law(model, flows.dyads), len(flows.dyads)
    # Gauss-Legendre on log w from 1e-3 to 1e6 units, in pieces short enough for a smooth density.
    nodes, weights = np.polynomial.legendre.leggauss(24)
    edges = np.linspace(np.log(1e-3), np.log(1e6), 61)
    total = np.zeros(n)
    for low, high in pairwise(edges):
        for node, weight in zip(nodes, weights, strict=True):
            log_w = 0.5 * (high - low) * node + 0.5 * (high + low)
            total += 0.5 * (high - low) * weight * np.exp(law.log_density(np.full(n, np.exp(log_w))) + log_w)
    expected = law.cdf(np.full(n, 1e6)) - law.cdf(np.full(n, 1e-3))
    require(
        np.allclose(total, expected, rtol=1e-6), f"{model.name}: the density does not integrate to the cdf"
    )


def unit_shifts_the_density(model: Model, flows: ExampleFlows) -> None:
    """Measured in a unit u times as large, a law of amounts gains exactly log(u) on each link."""
    unit = 10.0
    links = flows.dyads.links
    densities = []
    for dyads in (flows.dyads, ExampleFlows(flows.directed, unit=unit).dyads):
        law = cast(Law, model.fit(dyads)).distribution(dyads)
        densities.append(law.log_density(dyads.weights)[links])
    same = np.allclose(densities[1] - densities[0], np.log(unit), atol=1e-6)
    require(same, f"{model.name}: a change of unit is not a shift by log(unit)")


def weights_are_given_a_link(model: Model, flows: ExampleFlows) -> None:
    """A law of weights gives no probability to zero."""
    law, n = _law(model, flows.dyads), len(flows.dyads)
    require((law.link_probability == 1.0).all(), f"{model.name}: given a link, the link probability is one")
    require(np.isneginf(law.log_density(np.zeros(n))).all(), f"{model.name}: given a link, zero is possible")


def zero_has_the_rest_of_the_link_probability(model: Model, flows: ExampleFlows) -> None:
    """P(0) = 1 - link probability."""
    law, n = _law(model, flows.dyads), len(flows.dyads)
    zero = np.exp(law.log_density(np.zeros(n)))
    require(np.allclose(zero, 1.0 - law.link_probability, atol=1e-12), f"{model.name}: P(0) is not 1 - p")
