"""Which checks a model is put through: asked of what it declares, never of its name."""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeAlias

from steelyard.models.checks import fitting, laws
from steelyard.models.checks.example import ExampleFlows
from steelyard.models.checks.parameter_count import parameter_count_is_honest
from steelyard.models.contract import Holdout, Model, Part
from steelyard.models.measure import Measure

__all__ = ["Check", "checks_for"]

Check: TypeAlias = Callable[[Model, ExampleFlows], None]


def checks_for(model: Model) -> tuple[Check, ...]:
    """The checks that a model's declarations call for, quickest first.

    Each takes the model and the example flows of a kind (directed or not) that the model declares, and raises
    ContractError with the promise that is not kept.
    """
    checks: list[Check] = [
        fitting.method_sheet_is_filled,
        fitting.options_are_a_value,
        fitting.fit_is_certified,
        fitting.refit_is_bitwise_equal,
        fitting.estimates_are_complete,
        fitting.held_out_flows_do_not_matter,
        fitting.order_of_places_does_not_matter,
    ]
    if Holdout.NODES in model.holdouts:
        checks.append(fitting.unseen_nodes_are_predicted)
    if model.measure is None:
        return tuple(checks)
    checks += [
        laws.probabilities_are_probabilities,
        laws.impossible_flows_are_impossible,
        laws.subset_scores_as_in_whole,
        laws.quantiles_invert_the_cdf,
        laws.draws_have_the_stated_mean,
        laws.mean_is_the_expected_weight,
    ]
    if model.measure is Measure.AMOUNTS:
        checks += [laws.density_integrates_to_the_cdf, laws.unit_shifts_the_density]
    else:
        checks.append(laws.mass_adds_up_to_the_cdf)
    if model.part is Part.WEIGHTS:
        checks.append(laws.weights_are_given_a_link)
    else:
        checks.append(laws.zero_has_the_rest_of_the_link_probability)
        checks.append(parameter_count_is_honest)
    return tuple(checks)
