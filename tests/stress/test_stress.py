"""No econometric fit is silently wrong on hard simulated networks: a sample by default, all 200 with -m slow.

`python tests/stress/table.py` prints the whole table.
"""

from __future__ import annotations

import pytest
from cases import Case, Defect, cases
from table import trials
from trial import Ending

ALL = list(cases())
SAMPLE = [c for c in ALL if c.n_nodes <= 30][:16]


def test_the_cases_are_what_they_are_said_to_be() -> None:
    """200 networks of 20 to 200 nodes, zeros up to 95 %, weights up to 1e9, every defect 25 times."""
    assert len(ALL) == 200
    assert {c.n_nodes for c in ALL} >= {20, 200}
    assert {c.zeros for c in ALL} >= {0.0, 0.95}
    assert max(c.scale for c in ALL) == 1e9
    assert all(sum(c.defect is d for c in ALL) == 25 for d in Defect)
    assert {c.defect for c in SAMPLE} == set(Defect)


@pytest.mark.parametrize("case", SAMPLE, ids=lambda c: c.label)
def test_none_is_silently_wrong(case: Case) -> None:
    wrong = [f"{key}: {trial.reason}" for key, _, trial in trials(case) if trial.ending is Ending.WRONG]
    assert not wrong


@pytest.mark.slow
@pytest.mark.parametrize("case", [c for c in ALL if c not in SAMPLE], ids=lambda c: c.label)
def test_none_of_the_others_is_silently_wrong(case: Case) -> None:
    wrong = [f"{key}: {trial.reason}" for key, _, trial in trials(case) if trial.ending is Ending.WRONG]
    assert not wrong
