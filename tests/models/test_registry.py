"""The registry of models: built-ins keep the contract, and each rule says its own sentence when broken."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import pytest

from steelyard.datasets import Entry, RegistrationError, Registry, UnknownNameError
from steelyard.models import Family, Holdout, Model, Need, model_registry
from steelyard.models.contract import Requirements
from steelyard.models.maximum_entropy.density import DensityModel
from steelyard.models.registry import ModelClass


def registry_with(candidate: object, name: str = "stranger") -> Registry[ModelClass]:
    return model_registry().adding(name, Entry("the package example", lambda: candidate))


def variant(**declared: Any) -> type:
    """A copy of the density model under the name `stranger`, with some declarations replaced."""
    body = {k: v for k, v in vars(DensityModel).items() if not k.startswith("__")}
    body |= {"name": "stranger"} | declared
    kept = {k: v for k, v in body.items() if v is not ...}
    return dataclass(frozen=True)(type("Stranger", (), kept))


def test_built_ins_load_and_keep_the_contract() -> None:
    registry = model_registry()
    loaded, broken = registry.load_all()
    assert not broken
    assert set(loaded) >= {
        "configuration",
        "density",
        "geometric",
        "logit",
        "lognormal",
        "negative_binomial",
        "poisson",
    }
    for name, kind in loaded.items():
        model = kind() if kind.requires.covariates is not Need.REQUIRED else kind(covariates=("x",))
        assert isinstance(model, Model)
        assert model.name == name
        assert registry.get(name) is kind


def test_an_unknown_name_lists_the_nearest() -> None:
    with pytest.raises(UnknownNameError, match="poisson"):
        model_registry().get("poison")


def test_a_good_stranger_is_welcome() -> None:
    kind = variant()
    registry = registry_with(kind)
    assert registry.get("stranger") is kind
    # Registries are values: the original knows nothing of it.
    assert "stranger" not in model_registry().names


def _unfrozen() -> type:
    return dataclass(type("Stranger", (), {"name": "stranger"}))


def _with_field() -> type:
    body = {k: v for k, v in vars(DensityModel).items() if not k.startswith("__")}
    body |= {"name": "stranger", "covariates": (), "__annotations__": {"covariates": "tuple[str, ...]"}}
    return dataclass(frozen=True)(type("Stranger", (), body))


BROKEN: dict[str, tuple[Callable[[], object], str]] = {
    "no class": (lambda: 3, "a model must be a frozen dataclass; got 3"),
    "no dataclass": (lambda: type("Stranger", (), {}), "a model must be a frozen dataclass"),
    "an instance": (lambda: DensityModel(), r"a model must be a frozen dataclass; got DensityModel\(\)"),
    "not frozen": (_unfrozen, "Stranger must be frozen"),
    "no measure": (lambda: variant(measure=...), "must declare the class attribute 'measure', or None"),
    "measure as text": (
        lambda: variant(measure="links"),
        "must declare the class attribute 'measure', or None",
    ),
    "no fit": (lambda: variant(fit=...), r"Stranger must have a method fit\(dyads\)"),
    "another name": (lambda: variant(name="density"), "must declare name = 'stranger'.*got 'density'"),
    "no holdouts": (lambda: variant(holdouts=frozenset()), "at least one Holdout"),
    "holdouts as texts": (lambda: variant(holdouts=frozenset({"dyads"})), "at least one Holdout"),
    "a need without a field": (
        lambda: variant(requires=Requirements(Need.REQUIRED)),
        "a field 'covariates' exactly when it declares a need",
    ),
    "a field without a need": (_with_field, "a field 'covariates' exactly when it declares a need"),
}
DECLARED = {
    "name": "str",
    "family": "Family",
    "part": "Part",
    "holdouts": "frozenset",
    "directed": "frozenset",
    "information": "Information",
    "requires": "Requirements",
    "summary": "str",
    "formula": "str",
    "parameters": "str",
    "caution": "str",
    "sources": "str",
}


@pytest.mark.parametrize("rule", BROKEN)
def test_each_broken_rule_has_its_sentence(rule: str) -> None:
    make, sentence = BROKEN[rule]
    with pytest.raises(RegistrationError, match=sentence) as caught:
        registry_with(make()).get("stranger")
    assert str(caught.value).startswith("the model 'stranger' of the package example cannot be used: ")


@pytest.mark.parametrize("attribute", DECLARED)
@pytest.mark.parametrize("value", [..., 0], ids=["absent", "of another type"])
def test_each_declaration_is_asked_for(attribute: str, value: object) -> None:
    sentence = f"Stranger must declare the class attribute '{attribute}' as {DECLARED[attribute]}"
    with pytest.raises(RegistrationError, match=sentence):
        registry_with(variant(**{attribute: value})).get("stranger")


def test_a_plugin_that_cannot_be_imported_is_isolated() -> None:
    def load() -> object:
        raise ImportError("no module named example")

    registry = model_registry().adding("stranger", Entry("the package example", load))
    loaded, broken = registry.load_all()
    assert "stranger" not in loaded
    assert "poisson" in loaded
    (report,) = broken
    assert report.provider == "the package example"
    assert "ImportError: no module named example" in report.reason


def test_names_are_taken_once() -> None:
    with pytest.raises(RegistrationError, match="already taken by built in"):
        registry_with(variant(), name="poisson")
    with pytest.raises(RegistrationError, match="lower-case words"):
        registry_with(variant(), name="Poisson Model")


def test_declarations_of_the_variant_are_the_original_ones() -> None:
    """The tests above break one rule at a time only if everything else is in order."""
    kind = variant()
    assert kind.family is Family.MAXIMUM_ENTROPY  # type: ignore[attr-defined]  # made at run time
    assert kind.holdouts == frozenset(Holdout)  # type: ignore[attr-defined]  # likewise
