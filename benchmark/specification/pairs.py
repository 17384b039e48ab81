"""Which test applies to the likelihoods of two fitted candidates: likelihood ratio or Vuong."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

from steelyard.benchmark.specification.finding import Finding, not_computed
from steelyard.benchmark.specification.likelihoods import likelihood_ratio, vuong
from steelyard.datasets import Dyads, Floats
from steelyard.models import Fitted, Model, Part
from steelyard.models.estimates import Status
from steelyard.models.linear_index import node_pairs
from steelyard.models.nesting import Nesting, Reached, nesting
from steelyard.models.observed_links import observed_links

__all__ = ["Evaluated", "Side", "pair_findings"]

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
