"""Every option of every built-in model is described on its method sheet."""

from __future__ import annotations

from dataclasses import dataclass, fields

import pytest

from steelyard.benchmark.options import NOT_DESCRIBED, option_meanings
from steelyard.models import model_registry

MODELS = model_registry().load_all()[0]


@pytest.mark.parametrize("name", MODELS)
def test_every_option_is_described(name: str) -> None:
    meanings = dict(option_meanings(MODELS[name]))
    assert list(meanings) == [field.name for field in fields(MODELS[name])]
    assert not [option for option, meaning in meanings.items() if NOT_DESCRIBED in meaning]


def test_meanings_are_those_of_the_docstring() -> None:
    @dataclass(frozen=True)
    class Model:
        """A model.

        Parameters
        ----------
        first, second : two switches,
            told over two lines
        third : a number

        Raises
        ------
        ModelError : never : at all
        """

        first: bool = False
        second: bool = True
        third: int = 2
        fourth: str = "x"

    assert option_meanings(Model) == (  # type: ignore[arg-type]  # only its fields and docstring are read
        ("first", "two switches, told over two lines; by default false"),
        ("second", "two switches, told over two lines; by default true"),
        ("third", "a number; by default 2"),
        ("fourth", f"{NOT_DESCRIBED}; by default x"),
    )
