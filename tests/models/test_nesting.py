"""Which laws lie inside which: by covariates, by the table, by a plugin's own declaration, part by part."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar

import pytest

from steelyard.models import TwoPart, model_registry
from steelyard.models.econometric.logit import LogitModel
from steelyard.models.econometric.lognormal import LognormalModel
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel
from steelyard.models.econometric.poisson import PoissonModel
from steelyard.models.maximum_entropy.density import DensityModel
from steelyard.models.maximum_entropy.geometric import GeometricModel
from steelyard.models.nesting import CONTAINED, Reached, covariate_names, nesting

POISSON, LARGER = PoissonModel(("a",)), PoissonModel(("b", "a"))


def test_fewer_covariates_lie_inside_more() -> None:
    found = nesting(POISSON, LARGER)
    assert found is not None
    assert found.reached == (Reached.INSIDE,)
    assert found.declared
    assert nesting(LARGER, POISSON) is None
    assert nesting(PoissonModel(("a", "c")), LARGER) is None


def test_one_law_reaches_itself_without_restriction() -> None:
    found = nesting(PoissonModel(("a", "b")), LARGER)
    assert found is not None
    assert found.reached == ()


def test_poisson_lies_at_the_edge_of_the_negative_binomial() -> None:
    found = nesting(POISSON, NegativeBinomialModel(("a", "c")))
    assert found is not None
    assert found.reached == (Reached.EDGE,)
    assert nesting(LARGER, NegativeBinomialModel(("a",))) is None
    assert nesting(NegativeBinomialModel(("a",)), POISSON) is None


def test_two_parts_lie_inside_part_by_part() -> None:
    small = TwoPart(DensityModel(), LognormalModel(("a",)))
    large = TwoPart(LogitModel(("a",)), LognormalModel(("a", "b")))
    found = nesting(small, large)
    assert found is not None
    assert found.reached == (Reached.INSIDE, Reached.INSIDE)
    assert nesting(large, small) is None
    assert nesting(small, TwoPart(LogitModel(("a",)), GeometricModel(("a",)))) is None
    assert nesting(POISSON, large) is None


@dataclass(frozen=True)
class Switched(PoissonModel):
    effects: bool = False
    form: int = 2


def test_other_options_are_not_guessed() -> None:
    found = nesting(Switched(("a",)), Switched(("a",), effects=True))
    assert found is not None
    assert not found.declared
    assert nesting(Switched(("a",), form=1), Switched(("a",), form=2)) is None


def test_options_off_their_defaults_are_not_carried_across_kinds() -> None:
    larger = NegativeBinomialModel(("a",))
    usual, unusual = nesting(Switched(("a",)), larger), nesting(Switched(("a",), effects=True), larger)
    assert usual is not None
    assert usual.declared
    assert unusual is not None
    assert not unusual.declared


@dataclass(frozen=True)
class Plugin:
    covariates: tuple[str, ...] = ()
    name: ClassVar[str] = "plugin"
    contains: ClassVar[Mapping[str, Reached]] = {"poisson": Reached.LIMIT}


def test_a_plugin_declares_its_own() -> None:
    found = nesting(POISSON, Plugin(("a",)))  # type: ignore[arg-type]  # only what the rule looks at
    assert found is not None
    assert found.reached == (Reached.LIMIT,)
    assert nesting(POISSON, Plugin()) is None  # type: ignore[arg-type]


def test_covariate_names() -> None:
    assert covariate_names(LARGER) == ("b", "a")
    assert covariate_names(DensityModel()) == ()


@pytest.mark.parametrize("larger", sorted(CONTAINED))
def test_table_never_says_that_two_laws_contain_each_other(larger: str) -> None:
    assert all(larger not in CONTAINED.get(smaller, {}) for smaller in CONTAINED[larger])


def test_built_in_names_of_the_table_are_spelled_as_registered() -> None:
    """Models that this version lacks may stand in the table; what it has must be spelled alike."""
    known = set(model_registry().load_all()[0])
    named = set(CONTAINED) | {name for names in CONTAINED.values() for name in names}
    assert {"poisson", "negative_binomial", "logit", "density", "configuration", "geometric"} <= known & named
