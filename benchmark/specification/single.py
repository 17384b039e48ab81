"""Which tests apply to one fitted candidate, and their rows: overdispersion, RESET, Park."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import replace
from math import nan
from typing import Any, cast

import numpy as np

from steelyard.benchmark.specification.dispersion import overdispersion
from steelyard.benchmark.specification.finding import CLUSTERED, ROBUST, Finding, not_computed, ratio
from steelyard.benchmark.specification.mean import reset_least_squares, standardised_square
from steelyard.benchmark.specification.variance import park
from steelyard.datasets import Dyads, Floats
from steelyard.models import (
    ErrorKind,
    EstimatePart,
    Fitted,
    FlowDistribution,
    Law,
    Measure,
    Model,
    ModelError,
    Need,
    Part,
    Status,
    TwoPart,
)
from steelyard.models.compose import FittedTwoPart
from steelyard.models.distributions import LinkLaw, LognormalLinkLaw, PoissonLaw
from steelyard.models.linear_index import node_pairs
from steelyard.models.observed_links import observed_links

__all__ = ["single_findings"]

# No covariate of a study can have this name: it is written by no TOML key without quotes.
ADDED = "square of the fitted index"
UNCERTIFIED = "the fit is not certified"


def single_findings(model: Model, fitted: Fitted, dyads: Dyads) -> Iterator[tuple[str, Finding]]:
    """(test, finding) of everything that concerns this candidate alone.

    Which tests these are follows from what the model declares and from the law that it states.
    """
    law = None if model.measure is None else cast(Law, fitted).distribution(dyads)
    certified = fitted.convergence.converged
    if isinstance(law, PoissonLaw):
        yield from _guarded("overdispersion", certified, lambda: _overdispersion(law, dyads))
    for where, part, part_fitted in _parts(model, fitted):
        yield from _guarded("reset", certified, lambda: _reset(part, part_fitted, dyads, where), where)  # noqa: B023 - called at once
    if model.part is not Part.LINKS:
        yield from _guarded("park", certified, lambda: _park(model, fitted, law, dyads))


def _guarded(
    test: str, certified: bool, compute: Callable[[], Iterable[Finding]], where: str = ""
) -> Iterator[tuple[str, Finding]]:
    """The findings; whatever goes wrong becomes a row that says so."""
    if not certified:
        yield test, not_computed(where.rstrip(": ") or "all hypotheses", UNCERTIFIED)
        return
    try:
        found = list(compute())
    except ModelError as error:
        found = [not_computed(where.rstrip(": ") or "all hypotheses", str(error))]
    except Exception as error:  # noqa: BLE001 - a refit may run a stranger's plugin, which may raise anything
        found = [not_computed(where.rstrip(": ") or "all hypotheses", f"{type(error).__name__}: {error}")]
    for finding in found:
        yield test, finding


def _parts(model: Model, fitted: Fitted) -> list[tuple[str, Model, Fitted]]:
    """The models that have a mean of their own: both parts of a two-part law, else the model itself."""
    if isinstance(model, TwoPart) and isinstance(fitted, FittedTwoPart):
        return [("links: ", model.links, fitted.links), ("weights: ", model.weights, fitted.weights)]
    return [("", model, fitted)]


def _overdispersion(law: PoissonLaw, dyads: Dyads) -> Iterable[Finding]:
    return overdispersion(dyads.counts, law.mean, node_pairs(dyads))


def _reset(model: Model, fitted: Fitted, dyads: Dyads, where: str) -> Iterator[Finding]:
    against = f"{where}square of the fitted index"
    if model.requires.covariates is Need.NONE or not _covariates(model):
        yield not_computed(against, "the mean holds no covariates")
        return
    law = None if model.measure is None else cast(Law, fitted).distribution(dyads)
    if isinstance(law, LognormalLinkLaw):
        linked = observed_links(dyads)
        found = reset_least_squares(np.log(linked.weights), linked.design(_covariates(model)))
        yield replace(found, against=where + found.against)
    square = standardised_square(_index(fitted, law, dyads))
    if square is None:
        yield not_computed(against, "the fitted index does not vary")
        return
    larger = cast(Model, replace(cast(Any, model), covariates=(*_covariates(model), ADDED)))
    yield from _wald(larger.fit(dyads.with_column(ADDED, square)), against)


def _covariates(model: Model) -> tuple[str, ...]:
    """A model that declares a need for covariates has this field; the registry checks it."""
    return cast(tuple[str, ...], cast(Any, model).covariates)


def _index(fitted: Fitted, law: FlowDistribution | None, dyads: Dyads) -> Floats:
    """(n,) log odds of a link, or log of the expected weight; infinite where a dyad is decided."""
    if isinstance(law, LinkLaw):
        return law.log_odds
    with np.errstate(divide="ignore"):
        return np.log(fitted.expected_weight(dyads))


def _wald(refit: Fitted, against: str) -> Iterator[Finding]:
    """The coefficient of the added square over its two errors, from the model refitted with it."""
    if not refit.convergence.converged:
        yield not_computed(
            against, f"the refit with the square is not certified ({refit.convergence.message})"
        )
        return
    aside = (EstimatePart.DISPERSION, EstimatePart.INFLATION)
    row = next((r for r in refit.estimates if r.term == ADDED and r.part not in aside), None)
    if row is None or row.status is not Status.FREE:
        said = "the model reports no estimate for it" if row is None else row.note or row.status.value
        yield not_computed(against, f"the square has no estimate of its own: {said}")
        return
    for name, kind in ((ROBUST, ErrorKind.ROBUST), (CLUSTERED, ErrorKind.NODE_CLUSTERED)):
        error = row.standard_errors.get(kind, nan)
        note = (
            f"z of the added square (standardised) {row.value:.6g}, {name} error {error:.4g}, model refitted"
        )
        note += f"; {row.note}" if row.note else ""
        yield ratio(f"{against}; {name}", row.value, error**2, note)


def _park(model: Model, fitted: Fitted, law: FlowDistribution | None, dyads: Dyads) -> Iterator[Finding]:
    """Against the variance that the law states; a mean without a law is read against both common powers."""
    sample = observed_links(dyads) if model.part is Part.WEIGHTS else dyads
    pairs = node_pairs(sample)
    if law is None:
        mean = fitted.expected_weight(sample)
        for power, name in ((1.0, "the mean"), (2.0, "the squared mean")):
            yield from park(
                sample.weights, mean, mean, power, f"variance proportional to {name}; no law stated", pairs
            )
        return
    stated = cast(Law, fitted).distribution(sample)
    observed = sample.counts if stated.measure is Measure.COUNTS else sample.weights
    mean, variance = stated.mean, stated.variance
    for power, name in ((1.0, "the mean"), (2.0, "the squared mean")):
        if _is_power(mean, variance, power):
            yield from park(observed, mean, mean, power, f"variance proportional to {name}", pairs)
            return
    yield from park(observed, mean, variance, 1.0, "variance proportional to the law's own", pairs)


def _is_power(mean: Floats, variance: Floats, power: float) -> bool:
    """Whether a stated variance is a constant times a power of the mean, in logs so that nothing overflows."""
    used = (mean > 0) & (variance > 0) & np.isfinite(mean) & np.isfinite(variance)
    if not used.any():
        return False
    gap = np.log(variance[used]) - power * np.log(mean[used])
    return float(np.ptp(gap)) <= 1e-8 * max(1.0, float(np.abs(gap).max()))
