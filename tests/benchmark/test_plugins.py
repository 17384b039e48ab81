"""A model in a package of its own is found through its entry point; a broken one is reported, no more."""

from __future__ import annotations

import importlib
import sys
from pathlib import Path

import pytest

from steelyard.benchmark import run, study_from_text
from steelyard.benchmark.cli import main
from steelyard.datasets import RegistrationError
from steelyard.models import model_registry

MODULE = '''
from dataclasses import dataclass
from typing import ClassVar

from steelyard.models.econometric.poisson import PoissonModel


@dataclass(frozen=True)
class Doubled(PoissonModel):
    """A Poisson under another name."""

    name: ClassVar[str] = "doubled"


class NotAModel:
    pass
'''
POINTS = """
[steelyard.models]
doubled = wharf_models:Doubled
not_a_model = wharf_models:NotAModel
missing = wharf_no_such_module:Thing
poisson = wharf_models:Doubled
"""


@pytest.fixture
def wharf(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An installed distribution `wharf` with one good model, two broken ones and a clash."""
    site = tmp_path / "site"
    about = site / "wharf-1.0.dist-info"
    about.mkdir(parents=True)
    (site / "wharf_models.py").write_text(MODULE)
    (about / "METADATA").write_text("Metadata-Version: 2.1\nName: wharf\nVersion: 1.0\n")
    (about / "entry_points.txt").write_text(POINTS)
    monkeypatch.syspath_prepend(str(site))
    importlib.invalidate_caches()
    yield site
    sys.modules.pop("wharf_models", None)


@pytest.mark.usefixtures("wharf")
def test_the_good_one_is_used_and_the_others_are_named(capsys) -> None:
    registry = model_registry()
    assert "doubled" in registry.names
    found, broken = registry.load_all()
    assert found["doubled"].name == "doubled"
    reasons = {b.name: b.reason for b in broken}
    assert set(reasons) == {"not_a_model", "missing", "poisson"}
    assert "frozen dataclass" in reasons["not_a_model"]
    assert "wharf_no_such_module" in reasons["missing"]
    assert "already taken by built in" in reasons["poisson"]
    assert found["poisson"].__name__ == "PoissonModel"
    with pytest.raises(RegistrationError, match="the package wharf"):
        registry.get("missing")
    assert main(["models"]) == 0
    said = capsys.readouterr().out
    assert "doubled" in said
    assert said.count("not usable:") == 3


@pytest.mark.usefixtures("wharf")
def test_a_study_runs_with_a_plugin(small_text: str) -> None:
    text = small_text.replace('label = "Poisson"\nmodel = "poisson"', 'label = "Doubled"\nmodel = "doubled"')
    both = text + '[[candidates]]\nlabel = "Poisson"\nmodel = "poisson"\ncovariates = ["distance"]\n'
    results = run(study_from_text(both, folder=Path()), jobs=1, progress=False)
    values = results.candidates.set_index("candidate")["log_likelihood"]
    assert values["Doubled"] == values["Poisson"]
    assert results.n_failed == 0
