"""One model on one network: certified and right, refused by name, or silently wrong."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np
from independent import LIKELIHOODS, Likelihood, best_found, own_columns

from steelyard.datasets import Dyads, Floats
from steelyard.models import ErrorKind, Law, Measure, Model, Part
from steelyard.models.errors import ModelError
from steelyard.models.estimates import Status
from steelyard.models.observed_links import observed_links

__all__ = ["Ending", "Trial", "tried"]


class Ending(Enum):
    """How a trial ended."""

    CERTIFIED = "certified"
    REFUSED = "refused by name"
    WRONG = "silently wrong"


@dataclass(frozen=True)
class Trial:
    """An ending and why; `separated` tells certified fits that fixed something at a limit."""

    ending: Ending
    reason: str
    separated: bool = False


def tried(model: Model, key: str, dyads: Dyads, *, steps: int) -> Trial:
    """Fit, and let an independent optimiser look for a better likelihood.

    Parameters
    ----------
    key : which independent likelihood the model claims to maximise
    steps : how long the optimiser may search from each start
    """
    try:
        fitted = model.fit(dyads)
    except ModelError as error:
        return (
            Trial(Ending.REFUSED, str(error))
            if str(error)
            else Trial(Ending.WRONG, "refused without a reason")
        )
    convergence = fitted.convergence
    if not convergence.converged:
        named = bool(convergence.message)
        return Trial(Ending.REFUSED if named else Ending.WRONG, convergence.message or "no reason given")
    said = "separated" in convergence.message or "limit" in convergence.message
    fault = _fault(model, fitted, key, dyads, steps)  # type: ignore[arg-type]  # every model here states a law
    return Trial(Ending.WRONG, fault, said) if fault else Trial(Ending.CERTIFIED, convergence.message, said)


def _fault(model: Model, fitted: Law, key: str, dyads: Dyads, steps: int) -> str:
    """What an independent look holds against a certified fit; empty if nothing."""
    for row in fitted.estimates:
        if row.status is Status.FREE:
            error = row.standard_errors.get(ErrorKind.MODEL, np.nan)
            if not (np.isfinite(row.value) and 0 < error < np.inf):
                return f"{row.term}: value {row.value}, error {error} on a free parameter"
    seen = observed_links(dyads) if model.part is Part.WEIGHTS else dyads
    response = _response(model, seen)
    reached = float(np.sum(fitted.distribution(seen).log_density(response)))
    likelihood = LIKELIHOODS[key]
    columns = own_columns(seen.design(seen.covariates))
    starts = _starts(model, fitted, likelihood, seen, response, columns)
    best = best_found(likelihood, response, columns, starts, steps)
    rounding = 4e-15 * float(np.sum(response * (1.0 + np.abs(np.log(np.maximum(response, 1.0))))))
    if best > reached + 1e-5 + 1e-9 * abs(reached) + rounding:
        return f"log-likelihood {reached:.6f}, but {best:.6f} was found"
    return ""


def _response(model: Model, dyads: Dyads) -> Floats:
    if model.part is Part.LINKS:
        return dyads.links.astype(float)
    return dyads.counts if model.measure is Measure.COUNTS else dyads.weights


def _starts(
    model: Model, fitted: Law, likelihood: Likelihood, dyads: Dyads, response: Floats, columns: Floats
) -> list[Floats]:
    """From the data alone, and from somewhat beside the fit."""
    if model.part is Part.LINKS:
        share = np.clip(fitted.expected_weight(dyads), 1e-9, 1 - 1e-9)
        near = np.log(share / (1 - share))
        far = np.full(len(response), near.mean() / 2)
    else:
        near = np.log(np.clip(fitted.expected_weight(dyads), 1e-9, 1e15))
        far = np.log(response + 0.5 * max(float(response.mean()), 1e-3))
    scale = next((r.value for r in fitted.estimates if r.term in ("alpha", "sigma")), 1.0)
    log_scale = float(np.log(np.clip(scale, 1e-6, 1e6)))
    zeros = float(np.clip((response == 0).mean() / 2, 0.01, 0.9))
    flat = np.linalg.lstsq(columns, np.full(len(response), np.log(zeros / (1 - zeros))), rcond=None)[0]
    starts = []
    for index, last in ((near, log_scale + 0.1), (far, 0.0)):
        first = np.linalg.lstsq(columns, index, rcond=None)[0]
        inflation = [flat] if likelihood.inflation else []
        starts.append(np.concatenate([first, *inflation, [last] if likelihood.scale else []]))
    return starts
