"""Separation with node effects, against a linear programme for every zero, and what is left to fit."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import linprog
from scipy.sparse import csr_array

from steelyard.datasets import Bools, DyadCovariate, Dyads, Floats, FlowNetwork, Provenance, Transform
from steelyard.models import ModelError, Status
from steelyard.models.econometric.poisson import FittedPoissonMean, PoissonModel
from steelyard.models.effect_fit import fit_effects
from steelyard.models.effect_separation import effect_separation
from steelyard.models.index_likelihood import fit_indices
from steelyard.models.likelihoods import Poisson
from steelyard.models.node_effects import EffectEnds, NodeEffects


def dense_columns(ends: EffectEnds) -> Floats:
    """(n, P) indicators of the effects."""
    unit = np.eye(ends.n_nodes)
    first, second = unit[ends.first], unit[ends.second]
    return {
        NodeEffects.ORIGIN: first,
        NodeEffects.DESTINATION: second,
        NodeEffects.ORIGIN_AND_DESTINATION: np.hstack([first, second]),
        NodeEffects.NODE: first + second,
    }[ends.kind]


def separated_one_by_one(design: Floats, links: Bools) -> Bools:
    """For each zero: can its index fall while no other zero rises and no positive flow moves?"""
    found = np.zeros(len(links), dtype=bool)
    inside = design[links] if links.any() else None
    for row in np.flatnonzero(~links):
        answer = linprog(
            design[row],
            A_ub=design[~links],
            b_ub=np.zeros(int((~links).sum())),
            A_eq=inside,
            b_eq=None if inside is None else np.zeros(len(inside)),
            bounds=(-1, 1),
            method="highs",
        )
        assert answer.status == 0
        found[row] = answer.fun < -1e-6
    return found


def sample(seed: int, kind: NodeEffects) -> tuple[Floats, Floats, EffectEnds]:
    """Few nodes, many zeros, dyads left out, whole-number covariates: separated more often than not."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(4, 8))
    mask = rng.random((n, n)) < rng.choice([0.6, 1.0])
    mask = np.triu(mask, 1) if kind is NodeEffects.NODE and seed % 2 else mask & ~np.eye(n, dtype=bool)
    origin, destination = np.nonzero(mask)
    counts = rng.poisson(rng.choice([0.3, 0.8, 2.0]), size=len(origin)).astype(float)
    columns = rng.integers(-1, 2, size=(len(origin), int(rng.integers(0, 4)))).astype(float)
    # A covariate that is 0 wherever there is a flow is what slopes can be separated along.
    if columns.shape[1] and seed % 3:
        columns[:, 0] = np.where(counts > 0, 0.0, np.abs(columns[:, 0]))
    return counts, columns, kind.ends(origin.astype(np.int64), destination.astype(np.int64), n)


@pytest.mark.parametrize("seed", range(40))
@pytest.mark.parametrize("kind", NodeEffects)
def test_it_finds_what_a_programme_for_each_zero_finds(kind: NodeEffects, seed: int) -> None:
    counts, columns, ends = sample(seed, kind)
    design = np.hstack([dense_columns(ends), columns])
    found = effect_separation(counts > 0, columns, ends)
    np.testing.assert_array_equal(~found.keep, separated_one_by_one(design, counts > 0))
    if found.design is not None:
        assert found.design.rank == np.linalg.matrix_rank(design[found.keep])


def test_the_samples_hold_every_kind_of_separation() -> None:
    """None, by effects alone, and with the help of slopes."""
    seen = set()
    for seed in range(40):
        counts, columns, ends = sample(seed, NodeEffects.ORIGIN_AND_DESTINATION)
        found = effect_separation(counts > 0, columns, ends)
        seen.add((bool((~found.keep).any()), len(found.stages) > 1))
    assert seen >= {(False, False), (True, False), (True, True)}


@pytest.mark.parametrize("seed", range(40))
@pytest.mark.parametrize("kind", NodeEffects)
def test_what_is_left_is_fitted_as_if_the_separated_zeros_were_not_there(
    kind: NodeEffects, seed: int
) -> None:
    """Means and rank of the fit with a column for each effect, on the dyads left and on all of them."""
    counts, columns, ends = sample(seed, kind)
    keep = effect_separation(counts > 0, columns, ends).keep
    design = np.column_stack([np.ones(len(counts)), dense_columns(ends), columns])
    if keep.sum() <= np.linalg.matrix_rank(design[keep]):
        if keep.any():
            with pytest.raises(ModelError, match="dyads that are not separated cannot identify"):
                fit_effects(counts, columns, ends)
        else:
            assert fit_effects(counts, columns, ends).rank == 0
        return
    found = fit_effects(counts, columns, ends)
    assert found.convergence.converged
    np.testing.assert_array_equal(found.separated, ~keep)
    some = ends.restricted(keep)
    index = found.first[some.first] + found.second[some.second] + columns[keep] @ found.slopes
    left = fit_indices(Poisson(counts[keep]), [design[keep]])
    assert left.convergence.converged
    assert found.rank == left.rank
    np.testing.assert_allclose(
        np.exp(index), np.exp(design[keep] @ left.coefficients[0]), rtol=1e-7, atol=1e-9
    )
    whole = fit_indices(Poisson(counts), [design])
    np.testing.assert_array_equal(whole.separated, found.separated)
    assert whole.rank == found.rank


def dyads_of(flows: Floats, columns: dict[str, Floats] | None = None, *, directed: bool = True) -> Dyads:
    labels = tuple(f"n{i}" for i in range(len(flows)))
    network = FlowNetwork(
        labels, csr_array(flows), directed, 1.0, {}, columns or {}, Provenance("made in a test")
    )
    return Dyads(network, {name: DyadCovariate(name, Transform.NONE) for name in columns or {}})


def flows_and_tie(n: int = 9) -> tuple[Floats, Floats]:
    rng = np.random.default_rng(8)
    flows = rng.poisson(4.0, size=(n, n)).astype(float)
    np.fill_diagonal(flows, 0.0)
    return flows, rng.normal(size=(n, n))


def both(covariates: tuple[str, ...], dyads: Dyads) -> FittedPoissonMean:
    return PoissonModel(covariates, origin_effects=True, destination_effects=True).fit(dyads)


def test_a_node_without_out_flow_is_at_the_boundary_and_named() -> None:
    """It counts no parameter, its dyads have mean 0, and the others are as if it had no dyads."""
    flows, tie = flows_and_tie()
    flows[2, :] = 0.0
    dyads = dyads_of(flows, {"tie": tie})
    fitted = both(("tie",), dyads)
    row = fitted.estimates.row("node:n2:origin")
    assert (row.status, row.value, dict(row.standard_errors)) == (Status.BOUNDARY, -np.inf, {})
    assert row.note == "no flow on its training dyads: mean 0"
    assert fitted.n_parameters == 8 + 9 - 1 + 1
    assert fitted.convergence.converged
    assert "1 node effect at the boundary: n2 as origin" in fitted.convergence.message
    assert "8 separated dyads fixed at mean 0" in fitted.convergence.message
    mean = fitted.expected_weight(dyads)
    assert (mean[dyads.origin == 2] == 0).all()
    mask = np.ones((9, 9), dtype=bool)
    mask[2, :] = False
    without = both(("tie",), dyads.select(mask))
    kept = dyads.origin != 2
    np.testing.assert_allclose(mean[kept], without.expected_weight(dyads)[kept], rtol=1e-9)


def test_a_node_without_training_dyads_says_nothing_of_its_own() -> None:
    """Its effects are undefined, and its dyads are given the average training flow."""
    flows, tie = flows_and_tie()
    dyads = dyads_of(flows, {"tie": tie})
    mask = np.ones((9, 9), dtype=bool)
    mask[4, :] = mask[:, 4] = False
    training = dyads.select(mask)
    fitted = both(("tie",), training)
    row = fitted.estimates.row("node:n4:destination")
    assert row.status is Status.BOUNDARY
    assert np.isnan(row.value)
    assert row.note == "no training dyads"
    np.testing.assert_allclose(
        fitted.expected_weight(dyads.select(~mask)), training.counts.mean(), rtol=1e-12
    )


def test_a_slope_that_only_zeros_know_is_named_and_infinite() -> None:
    flows, tie = flows_and_tie()
    block = (np.arange(9)[:, None] + np.arange(9)[None, :]) % 5 == 0
    flows[block] = 0.0
    dyads = dyads_of(flows, {"tie": tie, "barred": block * 1.0})
    fitted = both(("tie", "barred"), dyads)
    row = fitted.estimates.row("barred")
    assert (row.status, row.value) == (Status.BOUNDARY, -np.inf)
    assert "separated along barred and effects" in fitted.convergence.message
    barred = dyads.column("barred") == 1.0
    assert (fitted.expected_weight(dyads)[barred] == 0).all()
    left = both(("tie",), dyads.select(~block))
    assert fitted.n_parameters == left.n_parameters
    np.testing.assert_allclose(
        fitted.expected_weight(dyads)[~barred], left.expected_weight(dyads)[~barred], rtol=1e-9
    )
    for kind, error in left.estimates.row("tie").standard_errors.items():
        assert fitted.estimates.row("tie").standard_errors[kind] == pytest.approx(error, rel=1e-8)


def test_components_have_a_gauge_each_and_dyads_between_them_are_undetermined() -> None:
    """Flows known only within two groups: rank 2 (n_o + n_d - 1), equal sums in each."""
    flows, tie = flows_and_tie(10)
    dyads = dyads_of(flows, {"tie": tie})
    group = np.arange(10) < 5
    mask = group[:, None] == group[None, :]
    training = dyads.select(mask)
    fitted = both(("tie",), training)
    assert fitted.n_parameters == 2 * (5 + 5 - 1) + 1
    for members in (range(5), range(5, 10)):
        sums = [
            sum(fitted.estimates.row(f"node:n{i}:{role}").value for i in members)
            for role in ("origin", "destination")
        ]
        assert sums[0] == pytest.approx(sums[1], abs=1e-9)
    np.testing.assert_allclose(
        fitted.expected_weight(dyads.select(~mask)), training.counts.mean(), rtol=1e-12
    )


def test_an_undirected_sample_between_two_sides_has_a_gauge_of_its_own() -> None:
    """With one effect a node, dyads that join two sides only identify one effect less."""
    flows, _ = flows_and_tie(10)
    dyads = dyads_of(np.triu(flows, 1), directed=False)
    side = np.arange(10) < 5
    mask = side[:, None] != side[None, :]
    assert PoissonModel((), node_effects=True).fit(dyads).n_parameters == 10
    assert PoissonModel((), node_effects=True).fit(dyads.select(mask)).n_parameters == 9


def test_no_flow_at_all_is_all_boundary() -> None:
    _, tie = flows_and_tie()
    dyads = dyads_of(np.zeros((9, 9)), {"tie": tie})
    fitted = both(("tie",), dyads)
    assert fitted.n_parameters == 0
    assert (fitted.expected_weight(dyads) == 0).all()
    assert "72 separated dyads fixed at mean 0" in fitted.convergence.message


def test_separation_of_many_zeros_needs_few_rows_of_the_programme() -> None:
    """180 nodes and a continuous covariate that is positive on zeros only: found, and all of them."""
    n, rng = 180, np.random.default_rng(3)
    flows = rng.poisson(1.0, size=(n, n)).astype(float)
    np.fill_diagonal(flows, 0.0)
    wall = np.where((flows == 0) & (rng.random((n, n)) < 0.3), rng.random((n, n)) + 0.5, 0.0)
    np.fill_diagonal(wall, 0.0)
    dyads = dyads_of(flows, {"wall": wall})
    fitted = both(("wall",), dyads)
    assert fitted.convergence.converged
    assert fitted.estimates.row("wall").value == -np.inf
    zero = fitted.expected_weight(dyads) == 0
    np.testing.assert_array_equal(zero, dyads.column("wall") > 0)
