"""Which tests apply to two fitted candidates: likelihood ratio, Vuong, rival means."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from steelyard.benchmark.specification.finding import Finding, not_computed
from steelyard.benchmark.specification.likelihoods import likelihood_ratio, vuong
from steelyard.benchmark.specification.means import rival_means
from steelyard.datasets import Dyads, Floats
from steelyard.models import Fitted, Model, Part, TwoPart
from steelyard.models.estimates import Status
from steelyard.models.linear_index import node_pairs
from steelyard.models.nesting import Nesting, Reached, covariate_names, nesting
from steelyard.models.observed_links import observed_links

__all__ = ["Evaluated", "Side", "mean_findings", "pair_findings"]

NODE_PREFIX = "node:"


@dataclass(frozen=True, eq=False)
class Evaluated:
    """A full-sample fit as arrays over the dyads: what tests of two candidates need, and no law.

    Attributes
    ----------
    certified, n_parameters : of the fit
    at_edge : how many scale parameters ended at the edge of their range
    by_node : whether it has parameters for single nodes
    log_densities : footing's text -> log densities, for the footings on which the likelihood is at its maximum
        or, through cells, nearly so; the law's own footing first
    mean : (n,) expected amounts; None for a model of one part alone
    link_probability : (n,), None where no law is stated
    """

    certified: bool
    n_parameters: int
    at_edge: int
    by_node: bool
    log_densities: Mapping[str, Floats]
    mean: Floats | None
    link_probability: Floats | None

    @classmethod
    def of(
        cls,
        fitted: Fitted,
        log_densities: Mapping[str, Floats],
        mean: Floats | None,
        link_probability: Floats | None,
    ) -> Evaluated:
        """From a fit and the arrays that its law gave."""
        rows = fitted.estimates
        return cls(
            fitted.convergence.converged,
            fitted.n_parameters,
            sum(row.positive and row.status is Status.BOUNDARY for row in rows),
            any(row.term.startswith(NODE_PREFIX) for row in rows),
            log_densities,
            mean,
            link_probability,
        )


@dataclass(frozen=True, eq=False)
class Side:
    """One of two candidates: its model, and what its fit to all dyads left."""

    model: Model
    fit: Evaluated


def pair_findings(first: Side, second: Side, dyads: Dyads) -> Iterator[tuple[str, Finding]]:
    """(test, finding) for two candidates' likelihoods: one of the two tests, as they are nested or not."""
    unsure = [name for name, e in (("the candidate", first), ("the other", second)) if not e.fit.certified]
    forward, back = nesting(first.model, second.model), nesting(second.model, first.model)
    test = "vuong" if forward is None and back is None else "likelihood_ratio"
    footing = next((text for text in first.fit.log_densities if text in second.fit.log_densities), None)
    if footing is None:
        yield (
            test,
            not_computed(
                "", "the two have no footing in common, so their likelihoods are of different things"
            ),
        )
    elif unsure:
        yield test, not_computed("", f"the fit of {' and of '.join(unsure)} is not certified")
    elif forward is not None and back is not None and not (forward.reached or back.reached):
        one = forward.declared and back.declared
        reason = (
            "the two are one law"
            if one
            else ("the two are one kind of law with other options, and how these relate is not declared")
        )
        yield test, not_computed("", reason)
    elif forward is not None:
        yield test, _ratio(first.fit, second.fit, forward, footing, "the candidate in the other")
    elif back is not None:
        yield test, _ratio(second.fit, first.fit, back, footing, "the other in the candidate")
    else:
        yield from (("vuong", finding) for finding in _vuong(first, second, footing, dyads))


def _vuong(first: Side, second: Side, footing: str, dyads: Dyads) -> Iterator[Finding]:
    given = first.model.part is Part.WEIGHTS
    found = vuong(
        first.fit.log_densities[footing],
        second.fit.log_densities[footing],
        first.fit.n_parameters,
        second.fit.n_parameters,
        node_pairs(observed_links(dyads) if given else dyads),
    )
    measures = {first.model.measure, second.model.measure}
    cells = "; the law of amounts enters through cells, where its fit is not the exact maximum"
    for finding in found:
        yield replace(finding, note=finding.note + (cells if len(measures) > 1 else ""))


def _ratio(smaller: Evaluated, larger: Evaluated, how: Nesting, footing: str, against: str) -> Finding:
    if not how.declared:
        return not_computed(against, "they differ in other options too, and how these relate is not declared")
    if Reached.LIMIT in how.reached:
        return not_computed(
            against,
            f"the smaller law is reached {Reached.LIMIT.value}, so no reference law is known; compare observed "
            "and expected zeros and the criteria instead",
        )
    if how.reached.count(Reached.EDGE) > 1:
        return not_computed(
            against, "several parameters are at their edge, so no simple reference law is known"
        )
    totals = [float(e.log_densities[footing].sum()) for e in (smaller, larger)]
    at_edge = Reached.EDGE in how.reached
    # A scale that ended at its edge counts no parameter, but was free to move.
    more = larger.n_parameters + larger.at_edge - smaller.n_parameters - smaller.at_edge
    return likelihood_ratio(totals[0], totals[1], more - int(at_edge), at_edge, against)


def mean_findings(
    candidate: Side, rivals: Mapping[int, Side], dyads: Dyads
) -> Mapping[int, tuple[Finding, ...]]:
    """The rival-means test of one candidate's mean against each of several others, by their keys.

    The derivatives of the mean are spanned by m x for a log-linear mean, and by m x, (1 - p) m x and p x
    otherwise (exact for two-part laws of a logit with a log-linear or a geometric weight), x its covariates.
    """
    reason = _no_null(candidate.fit)
    if not reason:
        usable = {key: r.fit.mean for key, r in rivals.items() if r.fit.mean is not None and r.fit.certified}
        gradient = _gradient(candidate, dyads)
        assert candidate.fit.mean is not None  # _no_null has a reason otherwise
        found = rival_means(
            dyads.weights, candidate.fit.mean, gradient, list(usable.values()), node_pairs(dyads)
        )
        done = dict(zip(usable, found, strict=True))
    else:
        done = {}
    why = reason or "the fit of the other is not certified"
    return {
        key: done.get(key, (not_computed("", why),))
        for key, rival in rivals.items()
        if rival.fit.mean is not None and candidate.fit.mean is not None
    }


def _no_null(candidate: Evaluated) -> str:
    if candidate.mean is None:
        return "it has no mean of whole flows"
    if not candidate.certified:
        return "the fit of the candidate is not certified"
    if candidate.by_node:
        return "the candidate's mean has a parameter for each node, and their derivatives are not taken out"
    return ""


def _gradient(candidate: Side, dyads: Dyads) -> Floats:
    """(n, k) columns that span the derivatives of the mean."""
    mean, p = candidate.fit.mean, candidate.fit.link_probability
    assert mean is not None  # asked for candidates with a mean only
    parts = (
        (candidate.model.links, candidate.model.weights)
        if isinstance(candidate.model, TwoPart)
        else (candidate.model,)
    )
    x = dyads.design(tuple(dict.fromkeys(name for part in parts for name in covariate_names(part))))
    own = mean[:, None] * x
    if p is None or _log_linear(mean, x):
        return own
    return np.hstack([own, (1.0 - p)[:, None] * own, p[:, None] * x])


def _log_linear(mean: Floats, x: Floats) -> bool:
    """Whether the log of the mean is a combination of the covariates."""
    used = (mean > 0) & np.isfinite(mean)
    logs = np.log(mean[used])
    if len(logs) <= x.shape[1]:
        return False
    scale = np.abs(x[used]).max(axis=0)
    columns = x[used] / np.where(scale > 0, scale, 1.0)
    rest = logs - columns @ np.linalg.lstsq(columns, logs, rcond=None)[0]
    return float(np.abs(rest).max()) <= 1e-6 * max(1.0, float(np.abs(logs).max()))
