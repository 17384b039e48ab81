"""Outside numbers, each from a file that says where it comes from, against the code that fits flows.

One TOML file a check in `checks/`: [source], [data], [fit], [expect]; README.md lists them. An expectation has a
`value`, an absolute tolerance `atol` (a number, or one for each entry), and `why` the tolerance is what it is.
`without` leaves out one position (the constant is 0), and `differs_at` names positions where the outside number is
known to differ, which must then do so. `effects` names two columns whose effects are absorbed; `cluster` names one or
two columns: observations that share a value of either are dependent.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fits import NAMES, Fit, Hurdle, check_file, fit

from steelyard.benchmark.criteria import Criterion
from steelyard.benchmark.scores import BRIER, LOG_SCORE
from steelyard.models import ErrorKind
from steelyard.models.distributions import (
    DispersionForm,
    NegativeBinomialLaw,
    PoissonLaw,
)

HURDLE_QUANTITIES: Mapping[str, Callable[[Hurdle], Any]] = {
    "aic": lambda h: h.criterion(Criterion.AIC),
    "bic": lambda h: h.criterion(Criterion.BIC),
    "coefficients": lambda h: h.counts.found.coefficients[0],
    # The links law has a parameter for the share of zeros, so that expected and observed zeros agree.
    "expected_zeros": lambda h: float((1.0 - h.links.distribution.link_probability).sum()),
    "link_coefficients": lambda h: h.links.found.coefficients[0],
    "link_errors_model": lambda h: h.links.errors(ErrorKind.MODEL),
    "log_likelihood": lambda h: h.log_likelihood,
    "log_likelihood_counts": lambda h: h.counts.log_likelihood,
    "log_likelihood_links": lambda h: h.links.log_likelihood,
    "log_theta": lambda h: -np.log(h.counts.scale),
    "n_parameters": lambda h: h.n_parameters,
}


QUANTITIES: Mapping[str, Callable[[Fit], Any]] = {
    "aic": lambda f: f.criterion(Criterion.AIC),
    "alpha": lambda f: f.scale,
    "alpha_error": lambda f: f.scale * np.sqrt(f.found.covariances[ErrorKind.MODEL][f.k, f.k]),
    "bic": lambda f: f.criterion(Criterion.BIC),
    "brier": lambda f: BRIER.summarise(BRIER.values(f.distribution.link_probability, f.response)),
    "coefficients": lambda f: f.found.coefficients[0],
    "deviance": lambda f: f.deviance,
    # One-way clusters: programs multiply by G / (G - 1), some also by (n - 1) / (n - k); ours has no factor.
    "errors_clustered": lambda f: f.errors(ErrorKind.NODE_CLUSTERED, f.clusters / (f.clusters - 1)),
    "errors_clustered_both": lambda f: f.errors(
        ErrorKind.NODE_CLUSTERED,
        f.clusters / (f.clusters - 1) * (len(f.response) - 1) / (len(f.response) - f.k),
    ),
    "errors_finite": lambda f: f.errors(ErrorKind.MODEL)[f.finite],
    "errors_hc0": lambda f: f.errors(ErrorKind.ROBUST, f.hc0),
    # Slopes alone counted, as programs for least squares do; sigma is one of our parameters.
    "errors_hc1_slopes": lambda f: f.errors(
        ErrorKind.ROBUST, f.hc0 * len(f.response) / (len(f.response) - f.k)
    ),
    "errors_least_squares": lambda f: f.errors(ErrorKind.MODEL, len(f.response) / (len(f.response) - f.k)),
    "errors_model": lambda f: f.errors(ErrorKind.MODEL),
    "expected_frequencies": lambda f: [f.frequency(c) for c in range(10)],
    "expected_zeros": lambda f: f.frequency(0),
    "finite_coefficients": lambda f: f.found.coefficients[0][f.finite],
    "inflation_coefficients": lambda f: f.found.coefficients[1],
    "infinite_terms": lambda f: [i for i in range(f.k) if i not in f.finite],
    "log_likelihood": lambda f: f.log_likelihood,
    "log_theta": lambda f: -np.log(f.scale),
    "log_score": lambda f: LOG_SCORE.summarise(
        LOG_SCORE.values(f.distribution.log_density(f.response), f.response)
    ),
    "n_parameters": lambda f: f.found.rank,
    "n_separated": lambda f: int(f.found.separated.sum()),
    "observed_zeros": lambda f: int((f.response == 0).sum()),
    "pearson_dispersion": lambda f: f.pearson_dispersion,
    "percent_correct": lambda f: 100 * np.mean((f.distribution.link_probability > 0.5) == (f.response == 1)),
    "pseudo_r_squared": lambda f: f.pseudo_r_squared,
    # What quasi-likelihood errors multiply the model errors by.
    "quasi_scale": lambda f: np.sqrt(f.pearson_dispersion),
    "r_squared": lambda f: f.r_squared,
    "theta": lambda f: 1 / f.scale,
}


# --- scores -----------------------------------------------------------------------------------------------


def scored(given: Mapping[str, Any]) -> Mapping[str, Any]:
    """Scores of plain numbers."""
    brier, poisson, negative_binomial = given["brier"], given["poisson"], given["negative_binomial"]
    one_category = BRIER.values(np.array(brier["probability"]), np.array(brier["outcome"], dtype=float))
    laws = (
        (PoissonLaw(np.array(poisson["mean"])), poisson),
        (
            NegativeBinomialLaw(
                np.array(negative_binomial["mean"]), negative_binomial["alpha"], DispersionForm.QUADRATIC
            ),
            negative_binomial,
        ),
    )
    minus = [
        LOG_SCORE.values(law.log_density(np.array(case["count"], dtype=float)), np.array(case["count"]))
        for law, case in laws
    ]
    return {
        "brier_two_categories": 2.0 * BRIER.summarise(one_category),
        "poisson_log_score": minus[0],
        "negative_binomial_log_score": minus[1],
    }


# --- the checks -------------------------------------------------------------------------------------------

EXPECTATIONS = [(name, quantity) for name in NAMES for quantity in check_file(name)["expect"]]


def measured(name: str, quantity: str) -> Any:
    found = fit(name)
    if isinstance(found, Hurdle):
        return HURDLE_QUANTITIES[quantity](found)
    return QUANTITIES[quantity](found)


@pytest.mark.parametrize(("name", "quantity"), EXPECTATIONS)
def test_outside_number(name: str, quantity: str) -> None:
    check = check_file(name)
    expected = check["expect"][quantity]
    got = scored(check["scores"])[quantity] if "scores" in check else measured(name, quantity)
    got = np.atleast_1d(np.asarray(got, dtype=float))
    if "without" in expected:
        got = np.delete(got, expected["without"])
    value = np.atleast_1d(np.asarray(expected["value"], dtype=float))
    assert got.shape == value.shape
    close = np.abs(got - value) <= np.broadcast_to(expected["atol"], value.shape)
    wanted = np.ones(len(value), dtype=bool)
    wanted[expected.get("differs_at", [])] = False
    np.testing.assert_array_equal(close, wanted, err_msg=f"{name}: {quantity} is {got}, outside {value}")


@pytest.mark.parametrize("name", [name for name in NAMES if "fit" in check_file(name)])
def test_fit_is_certified(name: str) -> None:
    found = fit(name)
    parts = [found.links, found.counts] if isinstance(found, Hurdle) else [found]
    for part in parts:
        assert part.found.convergence.converged
        assert part.found.convergence.residual <= 1e-8


@pytest.mark.parametrize("name", NAMES)
def test_provenance_is_complete(name: str) -> None:
    """Every file says where its numbers come from, and every number why it has its tolerance."""
    check = check_file(name)
    source = check["source"]
    assert isinstance(source["recalled"], bool)
    assert ("publication" in source) != ("software" in source)
    for quantity, expected in check["expect"].items():
        assert {"value", "atol", "why"} <= set(expected), quantity
        assert set(expected) <= {"value", "atol", "why", "without", "differs_at"}, quantity


def test_every_check_stands_in_the_table() -> None:
    table = (Path(__file__).parent / "README.md").read_text(encoding="utf-8")
    assert [name for name in NAMES if f"`{name}`" not in table] == []
