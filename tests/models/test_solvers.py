"""The Newton maximiser on functions whose maximum, or lack of one, is known; above all: no false certificate."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import pytest
from scipy.special import expit

from steelyard.datasets import Floats
from steelyard.models.solvers import Slope, newton_maximise


@dataclass(frozen=True)
class Function:
    """An objective from plain functions; indices are the coordinates themselves."""

    of: Callable[[Floats], float]
    gradient: Callable[[Floats], Floats]
    information: Callable[[Floats], Floats]

    def value(self, point: Floats) -> float:
        return self.of(point)

    def slope(self, point: Floats) -> Slope:
        gradient = self.gradient(point)
        return Slope(gradient, self.information(point), np.ones_like(gradient))

    def movement(self, step: Floats) -> float:
        return float(np.abs(step).max())


def quadratic(curvature: Floats, top: Floats) -> Function:
    return Function(
        lambda x: -0.5 * float((x - top) @ curvature @ (x - top)),
        lambda x: -curvature @ (x - top),
        lambda _: curvature,
    )


def logit(design: Floats, links: Floats) -> Function:
    """The same likelihood as in the package, written down anew."""

    def information(x: Floats) -> Floats:
        p = expit(design @ x)
        return (design.T * (p * (1 - p))) @ design

    return Function(
        lambda x: float(-np.logaddexp(0, np.where(links == 1, -1, 1) * (design @ x)).sum()),
        lambda x: design.T @ (links - expit(design @ x)),
        information,
    )


def test_a_quadratic_takes_one_step_to_its_top() -> None:
    top = np.array([1.0, -2.0, 3e4])
    curvature = np.array([[2.0, 0.3, 0.0], [0.3, 1.0, 0.1], [0.0, 0.1, 5.0]])
    found = newton_maximise(quadratic(curvature, top), np.zeros(3))
    assert found.convergence.converged
    # At the top the next step would move nothing, and is not taken.
    assert found.convergence.iterations == 1
    np.testing.assert_allclose(found.point, top, rtol=1e-13)
    np.testing.assert_array_equal(found.information, curvature)


@pytest.mark.parametrize("mean", [1e-6, 0.3, 7.0, 1e9])
@pytest.mark.parametrize("start", [-5.0, 0.0, 30.0])
def test_poisson_log_mean_in_closed_form(mean: float, start: float) -> None:
    """The maximum of n (m x - e^x) is log m, also from starts whose full step would overflow."""
    function = Function(
        lambda x: float(mean * x[0] - np.exp(min(x[0], 700.0))),
        lambda x: np.array([mean - np.exp(x[0])]),
        lambda x: np.array([[np.exp(x[0])]]),
    )
    found = newton_maximise(function, np.array([start]))
    assert found.convergence.converged
    assert found.point[0] == pytest.approx(np.log(mean), abs=1e-6)


def test_start_in_a_convex_region_is_left_uphill() -> None:
    """-(x^2 - 1)^2 is convex near 0: a plain Newton step from 0.1 would go down to the minimum at 0."""
    function = Function(
        lambda x: -float((x[0] ** 2 - 1) ** 2),
        lambda x: np.array([-4 * x[0] * (x[0] ** 2 - 1)]),
        lambda x: np.array([[12 * x[0] ** 2 - 4]]),
    )
    found = newton_maximise(function, np.array([0.1]))
    assert found.convergence.converged
    assert found.point[0] == pytest.approx(1.0, abs=1e-8)


@pytest.mark.parametrize(
    ("name", "function", "start"),
    [
        (
            "exact saddle",
            Function(
                lambda x: float(x[0] ** 2 - x[1] ** 2),
                lambda x: np.array([2 * x[0], -2 * x[1]]),
                lambda _: np.diag([-2.0, 2.0]),
            ),
            np.zeros(2),
        ),
        (
            "minimum",
            Function(lambda x: float(x @ x), lambda x: 2 * x, lambda x: -2 * np.eye(len(x))),
            np.zeros(2),
        ),
        ("flat direction", quadratic(np.diag([1.0, 0.0]), np.zeros(2)), np.array([1.0, 1.0])),
        ("flat mixed direction", quadratic(np.ones((2, 2)), np.zeros(2)), np.array([1.0, 3.0])),
        (
            "a slope without end",
            Function(lambda x: float(x[0]), lambda _: np.ones(1), lambda _: np.zeros((1, 1))),
            np.zeros(1),
        ),
        (
            "an asymptote: -e^-x rises for ever",
            Function(
                lambda x: -float(np.exp(-x[0])),
                lambda x: np.exp(-x),
                lambda x: np.exp(-x)[:, None],
            ),
            np.zeros(1),
        ),
        (
            "value nan everywhere though the slope is that of a maximum",
            Function(lambda _: float("nan"), lambda x: -x, lambda x: np.eye(len(x))),
            np.zeros(2),
        ),
        (
            "value minus infinity",
            Function(lambda _: -np.inf, lambda x: -x, lambda x: np.eye(len(x))),
            np.zeros(2),
        ),
        (
            "gradient nan",
            Function(lambda _: 0.0, lambda x: np.full_like(x, np.nan), lambda x: np.eye(len(x))),
            np.zeros(2),
        ),
        (
            "information nan",
            Function(lambda _: 0.0, lambda x: np.zeros_like(x), lambda x: np.full((2, 2), np.nan)),
            np.zeros(2),
        ),
        (
            "gradient and value contradict each other",
            Function(lambda x: -float(x[0]), lambda _: np.ones(1), lambda _: np.ones((1, 1))),
            np.zeros(1),
        ),
        ("complete separation", logit(np.array([[1.0, -1], [1, 1]]), np.array([0.0, 1.0])), np.zeros(2)),
        (
            "quasi-complete separation",
            logit(np.array([[1.0, 0], [1, 0], [1, 1], [1, 1]]), np.array([0.0, 1, 1, 1])),
            np.zeros(2),
        ),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_no_certificate_without_a_maximum(name: str, function: Function, start: Floats) -> None:
    found = newton_maximise(function, start)
    assert not found.convergence.converged, name
    assert found.convergence.message, "a refused certificate must say why"


def test_no_certificate_when_steps_run_out() -> None:
    function = logit(np.array([[1.0], [1], [1]]), np.array([0.0, 1.0, 1.0]))
    assert newton_maximise(function, np.array([4.0])).convergence.converged
    found = newton_maximise(function, np.array([4.0]), most=1)
    assert not found.convergence.converged
    assert found.convergence.iterations == 1


def test_separated_logits_are_never_certified() -> None:
    """Two hundred random complete separations: links follow the sign of a linear function of the covariates."""
    rng = np.random.default_rng(5)
    for _ in range(200):
        n, k = int(rng.integers(6, 40)), int(rng.integers(1, 4))
        design = np.column_stack([np.ones(n), rng.normal(size=(n, k))])
        links = (design @ rng.normal(size=k + 1) > 0).astype(float)
        assert not newton_maximise(logit(design, links), np.zeros(k + 1)).convergence.converged


def test_backtracking_never_goes_downhill() -> None:
    """Every accepted point of a hard start (log 1 + x^2, flat tails) is at least as high as the one before."""
    seen: list[float] = []

    def of(x: Floats) -> float:
        return -float(np.log1p(x[0] ** 2))

    def gradient(x: Floats) -> Floats:
        seen.append(of(x))
        return -2 * x / (1 + x**2)

    function = Function(of, gradient, lambda x: ((2 - 2 * x**2) / (1 + x**2) ** 2)[:, None])
    found = newton_maximise(function, np.array([40.0]))
    assert found.convergence.converged
    assert abs(found.point[0]) < 1e-6
    assert (np.diff(seen) >= -1e-12).all()
