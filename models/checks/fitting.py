"""Checks of `fit`: it is certified, repeatable, blind to held-out flows and to the order of places."""

from __future__ import annotations

from dataclasses import is_dataclass, replace

import numpy as np

from steelyard.datasets import Dyads, Floats
from steelyard.models.checks.broken import require
from steelyard.models.checks.example import ExampleFlows
from steelyard.models.contract import Model
from steelyard.models.estimates import ErrorKind, Status

__all__ = [
    "estimates_are_complete",
    "fit_is_certified",
    "held_out_flows_do_not_matter",
    "method_sheet_is_filled",
    "options_are_a_value",
    "order_of_places_does_not_matter",
    "refit_is_bitwise_equal",
    "unseen_nodes_are_predicted",
]


def method_sheet_is_filled(model: Model, flows: ExampleFlows) -> None:
    """Every line of the method sheet says something, and the model is defined for this kind of network."""
    for line in ("summary", "formula", "parameters", "caution", "sources"):
        require(str(getattr(model, line)).strip(), f"{model.name}: the method sheet's '{line}' is empty")
    require(model.holdouts, f"{model.name}: it must be scorable on something")
    require(
        flows.directed in model.directed, f"{model.name}: checked on a kind of network it does not declare"
    )


def options_are_a_value(model: Model, flows: ExampleFlows) -> None:
    """A model is frozen, equal to its equals, and unchanged by fitting."""
    before = repr(model)
    model.fit(flows.dyads)
    require(repr(model) == before, f"{model.name}: fit changed the model's options")
    require(is_dataclass(model), f"{model.name}: a model must be a frozen dataclass")
    require(hash(model) == hash(model), f"{model.name}: options must be hashable")


def fit_is_certified(model: Model, flows: ExampleFlows) -> None:
    """The fit of well-behaved flows converges, with a residual that says so."""
    found = model.fit(flows.dyads).convergence
    require(found.converged, f"{model.name}: not certified on the example: {found.message}")
    require(found.residual <= 1e-8, f"{model.name}: residual {found.residual:g} is above 1e-8")


def refit_is_bitwise_equal(model: Model, flows: ExampleFlows) -> None:
    """Fitting twice gives the same bits."""
    dyads = flows.dyads
    first, second = (model.fit(dyads).expected_weight(dyads) for _ in range(2))
    require(np.array_equal(first, second), f"{model.name}: two fits of the same flows differ")


def estimates_are_complete(model: Model, flows: ExampleFlows) -> None:
    """Free estimates are finite with finite model errors, and the parameter count does not exceed them."""
    fitted = model.fit(flows.dyads)
    free = [e for e in fitted.estimates if e.status is Status.FREE]
    for estimate in free:
        error = estimate.standard_errors.get(ErrorKind.MODEL, np.nan)
        require(
            np.isfinite(estimate.value), f"{model.name}: the free estimate '{estimate.term}' is not finite"
        )
        require(
            error > 0 and np.isfinite(error), f"{model.name}: '{estimate.term}' has no model standard error"
        )
    terms = [(e.part, e.term) for e in fitted.estimates]
    require(len(set(terms)) == len(terms), f"{model.name}: a term is listed twice")
    require(0 <= fitted.n_parameters <= len(free), f"{model.name}: more parameters than free estimates")


def held_out_flows_do_not_matter(model: Model, flows: ExampleFlows) -> None:
    """Flows outside the training dyads, however different, leave the fit as it was."""
    mask = flows.training_mask()
    own, other = flows.dyads, flows.changed_outside(mask).dyads
    first, second = (model.fit(dyads.select(mask)).expected_weight(own) for dyads in (own, other))
    require(np.array_equal(first, second), f"{model.name}: the fit looks at flows outside its training dyads")


def order_of_places_does_not_matter(model: Model, flows: ExampleFlows) -> None:
    """Listing the places in another order permutes the predictions and changes nothing else."""
    order = flows.new_order()
    other = replace(flows, order=order)
    plain = _matrix(flows.dyads, model.fit(flows.dyads).expected_weight(flows.dyads))
    moved = _matrix(other.dyads, model.fit(other.dyads).expected_weight(other.dyads))
    require(
        np.allclose(plain[np.ix_(order, order)], moved, rtol=1e-6, atol=1e-9),
        f"{model.name}: predictions depend on the order in which places are listed",
    )


def _matrix(dyads: Dyads, values: Floats) -> Floats:
    """(N, N) values, symmetric when undirected."""
    matrix = np.zeros((dyads.n_nodes, dyads.n_nodes))
    matrix[dyads.origin, dyads.destination] = values
    return matrix if dyads.directed else matrix + matrix.T


def unseen_nodes_are_predicted(model: Model, flows: ExampleFlows) -> None:
    """A model that declares NODES gives finite predictions for dyads of a node it never saw."""
    dyads = flows.dyads
    mask = np.ones((dyads.n_nodes, dyads.n_nodes), dtype=bool)
    mask[0, :] = mask[:, 0] = False
    expected = model.fit(dyads.select(mask)).expected_weight(dyads.select(~mask))
    require(np.isfinite(expected).all(), f"{model.name}: no finite prediction for an unseen node")
