"""One battery over every registered model, its options, and two-part laws of both families; directed and not."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from typing import Any

import pytest

from steelyard.models import Model, Need, Part, TwoPart, model_registry
from steelyard.models.checks import EXAMPLE_COVARIATES, Check, ExampleFlows, checks_for

# Options under which a model declares or estimates something else than by default.
VARIANTS: Mapping[str, tuple[Mapping[str, Any], ...]] = {
    "poisson": (
        {"origin_effects": True, "destination_effects": True},
        {"origin_effects": True},
        {"destination_effects": True},
        {"node_effects": True},
        {"amounts": True},
        {"amounts": True, "origin_effects": True, "destination_effects": True},
        {"amounts": True, "node_effects": True},
    ),
}


def registered() -> list[Model]:
    """Every registered model with the example's covariates, where it takes any."""
    found, broken = model_registry().load_all()
    assert not broken
    return [
        kind() if kind.requires.covariates is Need.NONE else kind(covariates=EXAMPLE_COVARIATES)
        for kind in found.values()
    ]


def variants() -> list[Model]:
    """Every model with the options of the table, besides those it has by default."""
    found, _ = model_registry().load_all()
    models = []
    for name, listed in VARIANTS.items():
        takes = found[name].requires.covariates is not Need.NONE
        covariates = {"covariates": EXAMPLE_COVARIATES} if takes else {}
        models += [found[name](**covariates, **options) for options in listed]
    return models


def two_part() -> list[Model]:
    """Every pair of a law of links and a law of weights."""
    models = registered()
    return [
        TwoPart(links, weights)
        for links in models
        if links.part is Part.LINKS
        for weights in models
        if weights.part is Part.WEIGHTS
    ]


CASES = [
    (model, check, directed)
    for model in (*registered(), *variants(), *two_part())
    for directed in sorted(model.directed)
    for check in checks_for(model)
]


def case_id(case: object) -> str:
    if isinstance(case, bool):
        return "directed" if case else "undirected"
    name = getattr(case, "name", None) or getattr(case, "__name__", str(case))
    switched = [f.name for f in fields(case) if getattr(case, f.name) is True] if is_dataclass(case) else []
    return " ".join([name, *switched])


@pytest.mark.parametrize(("model", "check", "directed"), CASES, ids=case_id)
def test_contract(model: Model, check: Check, directed: bool) -> None:
    check(model, ExampleFlows(directed))
