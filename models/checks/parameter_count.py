"""The honest parameter count: what fitting gains in sample and loses on fresh data is the number of parameters."""

from __future__ import annotations

from typing import cast

import numpy as np

from steelyard.datasets import Floats
from steelyard.models.checks.broken import require
from steelyard.models.checks.example import ExampleFlows
from steelyard.models.contract import Law, Model
from steelyard.models.measure import Measure

__all__ = ["parameter_count_is_honest"]

REPEATS = 60


def parameter_count_is_honest(model: Model, flows: ExampleFlows) -> None:
    """Simulate from the fit, refit, and compare in-sample with fresh log-likelihood.

    Refitting raises the log-likelihood of the simulated flows by about k / 2 above that of the simulating law,
    and lowers that of fresh flows by as much, so the two together estimate k (Akaike 1974). An allowance of a
    sixth and half a parameter covers the small sample; five standard errors cover the simulation.
    """
    truth = cast(Law, model.fit(flows.dyads))
    k = truth.n_parameters
    law = truth.distribution(flows.dyads)
    rng = np.random.default_rng(7)
    draws = law.draw(rng, 2 * REPEATS)
    gaps = [_gap(model, flows, truth, draws[i], draws[REPEATS + i]) for i in range(REPEATS)]
    finite = np.array([gap for gap in gaps if np.isfinite(gap)])
    require(
        len(finite) >= 0.8 * REPEATS,
        f"{model.name}: {REPEATS - len(finite)} of {REPEATS} refits call fresh flows impossible",
    )
    mean, error = float(finite.mean()), float(finite.std(ddof=1) / np.sqrt(len(finite)))
    require(
        abs(mean - k) <= 5.0 * error + k / 6.0 + 0.5,
        f"{model.name}: counts {k} parameters, but refits behave as {mean:.1f} (standard error {error:.1f}) would",
    )


def _gap(model: Model, flows: ExampleFlows, truth: Law, seen: Floats, fresh: Floats) -> float:
    """Gain on what was fitted plus loss on what was not."""
    dyads = flows.with_drawn(seen).dyads
    law, true_law = cast(Law, model.fit(dyads)).distribution(dyads), truth.distribution(dyads)
    if model.measure is Measure.LINKS:
        seen, fresh = (seen > 0).astype(np.float64), (fresh > 0).astype(np.float64)
    gain = law.log_density(seen) - true_law.log_density(seen)
    loss = true_law.log_density(fresh) - law.log_density(fresh)
    return float(gain.sum() + loss.sum())
