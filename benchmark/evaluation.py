"""From a fitted model and some dyads to log-likelihoods and scores, each on its footing.

A joint law speaks of links (through its link probability), of weights given a link, and of whole flows; a law
of amounts speaks of counts too, through its cells. Everything here is read off the distribution.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

import numpy as np

from steelyard.benchmark.footing import Footing, Scope
from steelyard.benchmark.scores import Score, Takes
from steelyard.datasets import Dyads, Floats
from steelyard.models import Fitted, FlowDistribution, Law, Measure, Part
from steelyard.models.distributions import CellLaw, HurdleLaw

__all__ = ["LogDensities", "ScoredRow", "log_densities", "score_rows"]


@dataclass(frozen=True, eq=False)
class LogDensities:
    """Log densities of what was observed, on one footing.

    `values` has one entry for each dyad of the footing: all of them, or those with a link.
    """

    footing: Footing
    values: Floats


@dataclass(frozen=True)
class ScoredRow:
    """One score of one candidate on one set of dyads."""

    footing: str
    score: str
    better: str
    value: float
    n_dyads: int
    n_impossible: int


def log_densities(law: FlowDistribution, part: Part, dyads: Dyads, footed: Dyads) -> Iterator[LogDensities]:
    """Every footing that a law can stand on.

    Parameters
    ----------
    law : on `dyads`
    part : what the law explains
    dyads : where it is evaluated
    footed : the dyads whose digest names the footing; in cross-validation those of the whole study
    """
    if part is Part.LINKS:
        yield LogDensities(Footing.of(footed, Measure.LINKS), law.log_density(dyads.links.astype(np.float64)))
        return
    laws = [law, CellLaw(law)] if law.measure is Measure.AMOUNTS else [law]
    for each in laws:
        yield from _on_own_measure(each, part, dyads, footed)
    if part is Part.JOINT:
        yield LogDensities(Footing.of(footed, Measure.LINKS), _links(law, dyads))


def _on_own_measure(law: FlowDistribution, part: Part, dyads: Dyads, footed: Dyads) -> Iterator[LogDensities]:
    observed = dyads.counts if law.measure is Measure.COUNTS else dyads.weights
    given = Footing.of(footed, law.measure, Scope.GIVEN_LINKS)
    if part is Part.WEIGHTS:
        yield LogDensities(given, law.log_density(observed)[dyads.links])
        return
    values = law.log_density(observed)
    yield LogDensities(Footing.of(footed, law.measure), values)
    yield LogDensities(given, _given_link(law, values, observed, dyads)[dyads.links])


def _given_link(law: FlowDistribution, whole: Floats, observed: Floats, dyads: Dyads) -> Floats:
    """(n,) log density given a link; only entries of dyads with a link are meant to be read.

    A two-part law has it as it stands, also where it gives the link no chance. Any other law loses it there.
    """
    if isinstance(law, HurdleLaw):
        return law.given_link.log_density(observed)
    if isinstance(law, CellLaw) and isinstance(law.amounts, HurdleLaw):
        return CellLaw(law.amounts.given_link).log_density(observed)
    link = _links(law, dyads)
    return np.asarray(np.subtract(whole, link, out=np.full(len(whole), -np.inf), where=np.isfinite(link)))


def _links(law: FlowDistribution, dyads: Dyads) -> Floats:
    """(n,) log probability of the observed presence or absence of each link."""
    log_zero = law.log_density(np.zeros(len(dyads)))
    with np.errstate(divide="ignore"):
        # 1 - P(0) from log P(0), without cancellation when a link is unlikely.
        log_link = np.log(-np.expm1(log_zero))
    return np.where(dyads.links, log_link, log_zero)


def score_rows(
    fitted: Fitted, part: Part, measure: Measure | None, dyads: Dyads, footed: Dyads, scores: Iterable[Score]
) -> list[ScoredRow]:
    """Every score that applies to a fitted model, on held-out (or any) dyads."""
    law = None if measure is None else _law(fitted).distribution(dyads)
    rows: list[ScoredRow] = []
    for score in scores:
        if score.takes is Takes.EXPECTED_FLOW:
            if part is Part.JOINT:
                values = score.values(fitted.expected_weight(dyads), dyads.weights)
                rows.append(_row(score, Footing.of(footed, None), values))
        elif law is None:
            continue
        elif score.takes is Takes.LINK_PROBABILITY:
            if part is not Part.WEIGHTS:
                values = score.values(law.link_probability, dyads.links.astype(np.float64))
                rows.append(_row(score, Footing.of(footed, Measure.LINKS), values))
        else:
            for found in log_densities(law, part, dyads, footed):
                rows.append(_row(score, found.footing, score.values(found.values, found.values)))
    return rows


def _law(fitted: Fitted) -> Law:
    return fitted  # type: ignore[return-value]  # a model with a measure promises a law; see the contract


def _row(score: Score, footing: Footing, values: Floats) -> ScoredRow:
    return ScoredRow(
        footing=footing.text,
        score=score.name,
        better=score.better.value,
        value=score.summarise(values),
        n_dyads=len(values),
        n_impossible=int(score.impossible(values).sum()),
    )
