"""One battery over every registered model and over two-part laws of both families, directed and undirected."""

from __future__ import annotations

import pytest

from steelyard.models import Model, Need, Part, TwoPart, model_registry
from steelyard.models.checks import EXAMPLE_COVARIATES, Check, ExampleFlows, checks_for


def registered() -> list[Model]:
    """Every registered model with the example's covariates, where it takes any."""
    found, broken = model_registry().load_all()
    assert not broken
    return [
        kind() if kind.requires.covariates is Need.NONE else kind(covariates=EXAMPLE_COVARIATES)
        for kind in found.values()
    ]


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
    for model in (*registered(), *two_part())
    for directed in sorted(model.directed)
    for check in checks_for(model)
]


def case_id(case: object) -> str:
    if isinstance(case, bool):
        return "directed" if case else "undirected"
    return getattr(case, "name", None) or getattr(case, "__name__", str(case))


@pytest.mark.parametrize(("model", "check", "directed"), CASES, ids=case_id)
def test_contract(model: Model, check: Check, directed: bool) -> None:
    check(model, ExampleFlows(directed))
