"""Which dyads degrees leave free: exact agreement with linear programmes, for every small graph."""

from __future__ import annotations

from itertools import combinations, permutations

import numpy as np
import pytest
from scipy.optimize import linprog

from steelyard.datasets import Bools, Floats, Integers
from steelyard.models.maximum_entropy.support import Support, degree_support

Pairs = tuple[tuple[int, int], ...]


def incidence(pairs: Pairs, n: int, directed: bool) -> Floats:
    """(constraints, dyads) 0/1: degrees, or out-degrees and then in-degrees."""
    matrix = np.zeros((2 * n if directed else n, len(pairs)))
    for column, (i, j) in enumerate(pairs):
        matrix[i, column] = matrix[n + j if directed else j, column] = 1.0
    return matrix


def free_by_programme(margins: Floats, counts: Floats) -> Bools:
    """(dyads,) True where some p of the polytope {0 <= p <= 1, margins p = counts} is strictly inside.

    One programme for all dyads: maximise the sum of t <= min(p, 1 - p, 0.01). Corners of these polytopes have
    entries 0, 1/2 or 1, so every free dyad has a point with t >= 1/4 or an average of two corners that has;
    the average over at most 12 dyads has t >= 0.02 on all of them at once. So the maximum has t = 0.01 exactly
    on the free dyads.
    """
    n = margins.shape[1]
    one = np.eye(n)
    answer = linprog(
        np.concatenate([np.zeros(n), -np.ones(n)]),
        A_eq=np.hstack([margins, np.zeros_like(margins)]),
        b_eq=counts,
        A_ub=np.vstack([np.hstack([-one, one]), np.hstack([one, one])]),
        b_ub=np.concatenate([np.zeros(n), np.ones(n)]),
        bounds=[(0, 1)] * n + [(0, 0.01)] * n,
        method="highs",
    )
    assert answer.status == 0
    t = answer.x[n:]
    assert (np.isclose(t, 0.0, atol=1e-6) | np.isclose(t, 0.01, atol=1e-6)).all(), (
        "the bound 0.01 is too large"
    )
    return np.asarray(t > 0.005)


def as_matrix(pairs: Pairs, values: Bools, n: int) -> Bools:
    matrix = np.zeros((n, n), dtype=bool)
    for (i, j), value in zip(pairs, values, strict=True):
        matrix[i, j] = value
    return matrix


def ends(pairs: Pairs) -> tuple[Integers, Integers]:
    array = np.array(pairs, dtype=np.int64).reshape(-1, 2)
    return array[:, 0], array[:, 1]


def support_of(pairs: Pairs, links: Bools, n: int, directed: bool) -> Support:
    known = as_matrix(pairs, np.ones(len(pairs), dtype=bool), n)
    return degree_support(as_matrix(pairs, links, n), known, directed=directed)


def check_fixed_dyads(support: Support, pairs: Pairs, links: Bools, free: Bools) -> None:
    """Exactly the free dyads are free; each other one is sure of what was observed on it."""
    np.testing.assert_array_equal(support.free(*ends(pairs)), free)
    np.testing.assert_array_equal(support.surely_linked(*ends(pairs)), links & ~free)
    np.testing.assert_array_equal(support.surely_empty(*ends(pairs)), ~links & ~free)


def test_all_undirected_graphs_on_five_nodes() -> None:
    """All 1,024 labelled graphs; the polytope depends on the degrees alone, so one programme serves many."""
    n = 5
    pairs = tuple(combinations(range(n), 2))
    margins = incidence(pairs, n, directed=False)
    known: dict[tuple[float, ...], Bools] = {}
    n_free = 0
    for code in range(2 ** len(pairs)):
        links = np.array([code >> k & 1 for k in range(len(pairs))], dtype=bool)
        counts = margins @ links
        # Nodes are alike: solve for sorted degrees and relabel.
        order = np.argsort(counts, kind="stable")
        key = tuple(counts[order].tolist())
        if key not in known:
            known[key] = free_by_programme(margins, np.array(key))
        place = np.argsort(order)
        sorted_free = as_matrix(pairs, known[key], n)
        sorted_free |= sorted_free.T
        free = np.array([sorted_free[place[i], place[j]] for i, j in pairs])
        check_fixed_dyads(support_of(pairs, links, n, directed=False), pairs, links, free)
        n_free += bool(free.any())
    assert 0 < n_free < 2 ** len(pairs)


def test_all_directed_graphs_on_four_nodes() -> None:
    """All 4,096, one programme for each sequence of out- and in-degrees, up to relabelling."""
    n = 4
    pairs = tuple(permutations(range(n), 2))
    margins = incidence(pairs, n, directed=True)
    known: dict[tuple[tuple[float, float], ...], Bools] = {}
    for code in range(2 ** len(pairs)):
        links = np.array([code >> k & 1 for k in range(len(pairs))], dtype=bool)
        counts = margins @ links
        order = np.lexsort((counts[n:], counts[:n]))
        key = tuple(zip(counts[:n][order].tolist(), counts[n:][order].tolist(), strict=True))
        if key not in known:
            known[key] = free_by_programme(margins, np.array(key).T.ravel())
        place = np.argsort(order)
        sorted_free = as_matrix(pairs, known[key], n)
        free = np.array([sorted_free[place[i], place[j]] for i, j in pairs])
        check_fixed_dyads(support_of(pairs, links, n, directed=True), pairs, links, free)


@pytest.mark.parametrize("directed", [True, False])
def test_masked_samples(directed: bool) -> None:
    """Random samples that leave dyads out, as cross-validation does."""
    rng = np.random.default_rng(7 + directed)
    n_free = n_fixed = 0
    for _ in range(500):
        n = int(rng.integers(3, 6)) if directed else int(rng.integers(4, 7))
        everything = tuple((permutations if directed else combinations)(range(n), 2))
        pairs = tuple(p for p in everything if rng.random() < rng.choice([0.5, 0.8]))
        if not pairs:
            continue
        links = rng.random(len(pairs)) < rng.choice([0.2, 0.5, 0.8])
        margins = incidence(pairs, n, directed)
        free = free_by_programme(margins, margins @ links)
        check_fixed_dyads(support_of(pairs, links, n, directed), pairs, links, free)
        n_free, n_fixed = n_free + int(free.sum()), n_fixed + int((~free).sum())
    assert n_free > 300
    assert n_fixed > 300


def held_out_range(margins: Floats, links: Bools, column: Floats) -> tuple[float, float]:
    """Smallest and largest change of a dyad's log odds along the directions of recession of the likelihood."""
    signed = margins.T * np.where(links, 1.0, -1.0)[:, None]
    found = [
        linprog(s * column, A_ub=-signed, b_ub=np.zeros(len(signed)), bounds=(-1, 1), method="highs").fun
        for s in (1.0, -1.0)
    ]
    return found[0], -found[1]


@pytest.mark.parametrize("directed", [True, False])
def test_held_out_dyads(directed: bool) -> None:
    """A held-out dyad is surely linked where its log odds can only rise for ever, surely empty where only fall.

    It has a finite fitted probability where its log odds never change. Where they can go either way the
    training dyads leave it open, and the support must claim nothing.
    """
    rng = np.random.default_rng(17 + directed)
    seen = {"linked": 0, "empty": 0, "free": 0, "open": 0}
    for _ in range(250):
        n = int(rng.integers(4, 7))
        everything = tuple((permutations if directed else combinations)(range(n), 2))
        inside = rng.random(len(everything)) < rng.choice([0.7, 0.9])
        if not inside.any():
            continue
        pairs = tuple(p for p, keep in zip(everything, inside, strict=True) if keep)
        out = tuple(p for p, keep in zip(everything, inside, strict=True) if not keep)
        links = rng.random(len(pairs)) < rng.choice([0.2, 0.5, 0.8])
        support = support_of(pairs, links, n, directed)
        margins, others = incidence(pairs, n, directed), incidence(out, n, directed)
        for column, (i, j) in enumerate(out):
            low, high = held_out_range(margins, links, others[:, column])
            rises, falls = high > 1e-7, low < -1e-7
            where = np.array([i]), np.array([j])
            got = [bool(f(*where)[0]) for f in (support.surely_linked, support.surely_empty, support.free)]
            assert got == [rises and not falls, falls and not rises, not rises and not falls], (
                pairs,
                links,
                i,
                j,
            )
            seen[("open" if rises and falls else "linked" if rises else "empty" if falls else "free")] += 1
    assert min(seen.values()) > 5, seen


def test_the_path_on_four_nodes() -> None:
    """Degrees 1 2 2 1 have no finite maximum although no degree is 0 or 3 (design, 7.1).

    Two graphs have them, 0-1-2-3 and 0-2-1-3: the middle 1-2 is always linked, the ends 0-3 never, and the
    other four dyads are free.
    """
    pairs = tuple(combinations(range(4), 2))
    path = {(0, 1), (1, 2), (2, 3)}
    links = np.array([p in path for p in pairs])
    free = np.array([p not in {(1, 2), (0, 3)} for p in pairs])
    check_fixed_dyads(support_of(pairs, links, 4, directed=False), pairs, links, free)


def test_a_cycle_is_free_everywhere() -> None:
    """The cycle on five nodes has the degrees of p = 1/2 on every dyad."""
    pairs = tuple(combinations(range(5), 2))
    links = np.array([(j - i) % 5 in (1, 4) for i, j in pairs])
    check_fixed_dyads(support_of(pairs, links, 5, directed=False), pairs, links, np.ones(10, dtype=bool))


@pytest.mark.parametrize("directed", [True, False])
def test_split_networks_are_fixed(directed: bool) -> None:
    """A complete core, an independent periphery, nested links between them: a threshold graph, of any size."""
    n = 30
    weight = np.arange(n) / n
    links = weight[:, None] + weight[None, :] > 0.93
    np.fill_diagonal(links, False)
    known = ~np.eye(n, dtype=bool)
    i, j = np.nonzero(known)
    support = degree_support(links, known, directed=directed)
    if not directed:
        assert not support.free(i, j).any()
    # Directed the diagonal, which is no dyad, lets some cycles through; the sure ones must still be right.
    assert not (support.surely_linked(i, j) & ~links[i, j]).any()
    assert not (support.surely_empty(i, j) & links[i, j]).any()
