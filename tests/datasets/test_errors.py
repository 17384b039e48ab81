"""The tree of errors: one root, useful texts, and texts that come back from worker processes."""

from __future__ import annotations

import pickle

import pytest

from steelyard.datasets import (
    CovariateError,
    DataError,
    RegistrationError,
    SteelyardError,
    UnknownNameError,
)
from steelyard.datasets.errors import nearest_names, suggestion


def test_every_error_hangs_on_the_root() -> None:
    for error in (DataError, CovariateError, RegistrationError, UnknownNameError):
        assert issubclass(error, SteelyardError)
    assert issubclass(CovariateError, DataError)


@pytest.mark.parametrize("kind", [DataError, CovariateError])
def test_all_problems_survive_a_trip_to_another_process(kind: type[DataError]) -> None:
    again = pickle.loads(pickle.dumps(kind("one", "two")))
    assert type(again) is kind
    assert again.problems == ("one", "two")
    assert str(again) == "one\ntwo"


def test_an_unknown_name_survives_it_too() -> None:
    error = UnknownNameError("model", "poison", ["poisson", "gamma"], where="s.toml, candidate 2")
    again = pickle.loads(pickle.dumps(error))
    assert (
        str(again)
        == str(error)
        == ("there is no model named 'poison' (s.toml, candidate 2); did you mean 'poisson'?")
    )
    assert (again.kind, again.name, again.nearest) == ("model", "poison", ("poisson",))


def test_suggestions_are_the_nearest_or_everything() -> None:
    assert nearest_names("distanse", ["distance", "size"]) == ("distance",)
    assert suggestion("zzz", ["b", "a"]) == "known are: a, b"
    assert suggestion("zzz", []) == "known are: none"
    assert suggestion("prot", ["ports", "size", "port"]) == "did you mean 'port' or 'ports'?"
