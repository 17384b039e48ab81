"""Folds: every dyad tested once, pairs together, links shared out evenly, the same on every machine."""

from __future__ import annotations

import numpy as np
import pytest

from steelyard.benchmark import DyadFolds
from steelyard.models.checks import ExampleFlows


@pytest.mark.parametrize("directed", [True, False])
@pytest.mark.parametrize("folds", [2, 7, 10])
def test_each_dyad_is_tested_exactly_once(directed: bool, folds: int) -> None:
    dyads = ExampleFlows(directed).dyads
    tested = np.zeros((dyads.n_nodes, dyads.n_nodes), dtype=int)
    for fold in DyadFolds(folds, 1, seed=3):
        training, test = fold.divide(dyads)
        assert len(training) + len(test) == len(dyads)
        tested[test.origin, test.destination] += 1
        seen = set(zip(training.origin.tolist(), training.destination.tolist(), strict=True))
        assert not seen & set(zip(test.origin.tolist(), test.destination.tolist(), strict=True))
    assert (tested[dyads.origin, dyads.destination] == 1).all()


def test_both_directions_share_a_fold() -> None:
    dyads = ExampleFlows(directed=True).dyads
    assigned = DyadFolds(10, 1, seed=3).assignment(dyads, repeat=1)
    assert (assigned == assigned.T).all()
    assert set(np.unique(assigned[~np.eye(dyads.n_nodes, dtype=bool)])) == set(range(1, 11))


def test_links_are_shared_out_evenly() -> None:
    """Pairs are dealt within strata of 0, 1 and 2 links, so folds differ by at most three pairs' links."""
    dyads = ExampleFlows(directed=True).dyads
    links = [fold.divide(dyads)[1].n_links for fold in DyadFolds(10, 1, seed=3)]
    assert max(links) - min(links) <= 3
    sizes = [len(fold.divide(dyads)[1]) for fold in DyadFolds(10, 1, seed=3)]
    assert max(sizes) - min(sizes) <= 2


def test_seed_and_repeat_decide() -> None:
    dyads = ExampleFlows(directed=True).dyads
    first = DyadFolds(5, 2, seed=3)
    assert (first.assignment(dyads, 1) == DyadFolds(5, 2, seed=3).assignment(dyads, 1)).all()
    assert (first.assignment(dyads, 1) != first.assignment(dyads, 2)).any()
    assert (first.assignment(dyads, 1) != DyadFolds(5, 2, seed=4).assignment(dyads, 1)).any()
    assert [(f.repeat, f.fold) for f in DyadFolds(2, 2, seed=0)] == [(1, 1), (1, 2), (2, 1), (2, 2)]


def test_folds_of_a_view_stay_inside_it() -> None:
    flows = ExampleFlows(directed=True)
    view = flows.dyads.select(flows.training_mask())
    total = sum(len(fold.divide(view)[1]) for fold in DyadFolds(4, 1, seed=1))
    assert total == len(view)
