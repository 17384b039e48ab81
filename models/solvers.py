"""One Newton maximiser for every likelihood here, and the certificate that says whether a fit is a fit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from scipy.linalg import cho_factor, cho_solve, cholesky, eigh

from steelyard.datasets.arrays import Floats
from steelyard.models.contract import Convergence

__all__ = ["NEGLIGIBLE", "Maximum", "Objective", "Slope", "newton_maximise"]

RESIDUAL_LIMIT = 1e-8
DECREMENT_LIMIT = 1e-10
# The square of a distance in standard errors: a step of 1e-12 of them is not worth an evaluation.
NEGLIGIBLE = 1e-24
# A decrement of 0.01 is a tenth of a standard error from the top.
NEAR = 1e-2
# Under separation each Newton step moves some linear index by about 1 for ever; at a true maximum the steps
# shrink quadratically. So the size of the last step, in index units, tells the two apart.
MOVEMENT_LIMIT = 1e-6


@dataclass(frozen=True)
class Slope:
    """Derivatives at a point.

    Attributes
    ----------
    gradient : (k,)
    information : (k, k), minus the Hessian
    scale : (k,) sum of the absolute terms of which each gradient component is the sum
    """

    gradient: Floats
    information: Floats
    scale: Floats


class Objective(Protocol):
    """A function to be maximised."""

    def value(self, point: Floats, /) -> float:
        """The function; -inf or nan where it is not defined."""

    def slope(self, point: Floats, /) -> Slope:
        """Gradient, information and gradient scale."""

    def movement(self, step: Floats, /) -> float:
        """Largest change of any linear index under a step, so that all columns are judged in one unit."""


@dataclass(frozen=True)
class Maximum:
    """Where the search ended, and its certificate. `information` is that at `point`."""

    point: Floats
    information: Floats
    convergence: Convergence


def newton_maximise(
    objective: Objective, start: Floats, *, most: int = 100, negligible: float = NEGLIGIBLE
) -> Maximum:
    """Newton's method with backtracking; curvature that is not concave is mended by its absolute eigenvalues.

    Parameters
    ----------
    objective : the function
    start : (k,) a point where the function is finite
    most : largest number of steps
    negligible : decrement from which on no step is worth an evaluation

    Returns
    -------
    Maximum, whose convergence was worked out at the last point from gradient and information alone.
    """
    point = start
    value: float | None = None  # worked out when it is asked for
    slope = objective.slope(point)
    iterations = 0
    stalled = False
    step = np.full_like(start, np.inf)
    while iterations < most and not stalled:
        step = _ascent_step(slope)
        decrement = float(slope.gradient @ step)
        if iterations and 0 <= decrement <= negligible and objective.movement(step) <= MOVEMENT_LIMIT:
            break
        iterations += 1
        beyond = _slope_beyond(objective, point, step, decrement)
        if beyond is not None:
            point, slope, value = point + step, beyond, None
        else:
            value = objective.value(point) if value is None else value
            length, value = _step_length(objective, point, step, value, decrement)
            stalled = length == 0.0
            if not stalled:
                point = point + length * step
                slope = objective.slope(point)
        if decrement <= DECREMENT_LIMIT**1.2 and objective.movement(step) <= MOVEMENT_LIMIT:
            break
    movement = objective.movement(step) if iterations else np.inf
    value = objective.value(point) if value is None else value
    return _certified(point, value, slope, iterations, movement)


def _slope_beyond(objective: Objective, point: Floats, step: Floats, decrement: float) -> Slope | None:
    """The slope after a whole step, where it shows by itself that the step has reached the top of its line.

    That is asked only close to a maximum, where the function is all but quadratic; it saves the value.
    """
    if not DECREMENT_LIMIT**1.2 <= decrement <= NEAR:
        return None
    slope = objective.slope(point + step)
    finite = np.isfinite(slope.gradient).all() and np.isfinite(slope.information).all()
    return slope if finite and abs(float(slope.gradient @ step)) <= 0.1 * decrement else None


def _ascent_step(slope: Slope) -> Floats:
    """Newton step where the information is positive definite, else along its absolute eigenvalues."""
    if not np.isfinite(slope.information).all() or not np.isfinite(slope.gradient).all():
        return np.zeros_like(slope.gradient)
    try:
        return np.asarray(cho_solve(cho_factor(slope.information), slope.gradient))
    except np.linalg.LinAlgError:
        values, vectors = eigh(slope.information)
        floor = max(1e-10 * float(np.abs(values).max()), 1e-300)
        lifted = np.maximum(np.abs(values), floor)
        return np.asarray(vectors @ ((vectors.T @ slope.gradient) / lifted))


def _step_length(
    objective: Objective, point: Floats, step: Floats, value: float, decrement: float
) -> tuple[float, float]:
    """The longest of 1, 1/2, 1/4, ... that gains what a concave function must, with the value there; else 0."""
    slack = 1e-13 * max(1.0, abs(value))
    length = 1.0
    for _ in range(60):
        trial = objective.value(point + length * step)
        if np.isfinite(trial) and trial >= value + 1e-4 * length * decrement - slack:
            return length, trial
        length /= 2.0
    return 0.0, value


def _certified(point: Floats, value: float, slope: Slope, iterations: int, movement: float) -> Maximum:
    """Judge the last point; `movement` is the size of the step that led to it."""
    finite = bool(np.isfinite(value) and np.isfinite(point).all() and np.isfinite(slope.gradient).all())
    if not finite or not np.isfinite(slope.information).all():
        return Maximum(point, slope.information, Convergence(False, iterations, np.inf, "not finite"))
    residual = float(np.max(np.abs(slope.gradient) / np.maximum(1.0, slope.scale), initial=0.0))
    definite = _positive_definite(slope.information)
    decrement = float(slope.gradient @ _ascent_step(slope)) if definite else np.inf
    reasons = []
    if residual > RESIDUAL_LIMIT and not 0 <= decrement <= DECREMENT_LIMIT:
        reasons.append(f"gradient residual {residual:.1e} after {iterations} steps")
    if not definite:
        reasons.append("information matrix not positive definite")
    if movement > MOVEMENT_LIMIT:
        reasons.append("estimates still moving")
    return Maximum(
        point, slope.information, Convergence(not reasons, iterations, residual, "; ".join(reasons))
    )


def _positive_definite(information: Floats) -> bool:
    """Whether the information is positive definite well above rounding, columns being of unit scale."""
    diagonal = np.diag(information)
    if (diagonal <= 0).any():
        return False
    root = np.sqrt(diagonal)
    try:
        factor = cholesky(information / np.outer(root, root))
    except np.linalg.LinAlgError:
        return False
    return float(np.diag(factor).min()) > 1e-6
