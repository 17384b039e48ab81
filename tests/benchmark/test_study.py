"""Study files: what is right becomes objects, what is wrong becomes one sentence each."""

from __future__ import annotations

from pathlib import Path

import pytest

from steelyard.benchmark import load_study, study_from_text
from steelyard.datasets import (
    DistanceCovariate,
    DyadCovariate,
    End,
    MatchCovariate,
    NodeCovariate,
    SteelyardError,
    Transform,
)
from steelyard.models import Family, Information, TwoPart
from steelyard.models.econometric.negative_binomial import NegativeBinomialModel

HEAD = """
title = "t"
seed = 1
[data]
dataset = "islands"
[covariates]
origin_size = { node = "throughput", end = "origin", transform = "log" }
distance = { dyad = "sea_distance", transform = "log" }
same = { node = "language", match = true }
sphere = { coordinates = ["latitude", "longitude"], transform = "log1p" }
[specifications]
gravity = ["origin_size", "distance"]
"""
POISSON = """
[[candidates]]
label = "P"
model = "poisson"
covariates = "gravity"
"""
ZIP = """
[[candidates]]
model = "zero_inflated_poisson"
covariates = "gravity"
"""


def study(text: str):
    return study_from_text(text, folder=Path(), name="study.toml")


def problems(text: str) -> list[str]:
    with pytest.raises(SteelyardError) as caught:
        study(text)
    return str(caught.value).splitlines()


def test_a_study_becomes_objects() -> None:
    found = study(HEAD + POISSON + '[[validation]]\nscheme = "dyads"\nfolds = 4\nrepeats = 2\n')
    assert found.covariates == {
        "origin_size": NodeCovariate("throughput", End.ORIGIN, Transform.LOG),
        "distance": DyadCovariate("sea_distance", Transform.LOG),
        "same": MatchCovariate("language"),
        "sphere": DistanceCovariate("latitude", "longitude", Transform.LOG1P),
    }
    assert found.candidates[0].label == "P"
    assert found.candidates[0].model.covariates == ("origin_size", "distance")
    assert (found.validation[0].folds, found.validation[0].repeats, found.validation[0].seed) == (4, 2, 1)
    assert found.network.n_nodes == 60


def test_options_reach_their_models() -> None:
    """Inflation takes a specification's name or a list of names, and is the constant alone where it is not given."""
    text = HEAD + ZIP + 'label = "a"\n' + ZIP + 'label = "b"\ninflation = "gravity"\n'
    text += ZIP + 'label = "c"\ninflation = ["distance"]\n'
    text += POISSON.replace("poisson", "negative_binomial").replace('"P"', '"d"') + "form = 1\n"
    first, second, third, fourth = (c.model for c in study(text).candidates)
    assert (first.inflation, second.inflation, third.inflation) == (
        (),
        ("origin_size", "distance"),
        ("distance",),
    )
    assert fourth.form == 1


def test_a_grid_expands_to_every_pair() -> None:
    grid = """
[[candidates]]
label = "grid"
links = [{ model = "density" }, { model = "configuration" }]
weights = [{ model = "geometric" }, { model = "lognormal", covariates = ["distance"] }]
"""
    found = study(HEAD + grid).candidates
    assert [c.label for c in found] == [
        "grid: density x geometric",
        "grid: density x lognormal",
        "grid: configuration x geometric",
        "grid: configuration x lognormal",
    ]
    assert all(isinstance(c.model, TwoPart) for c in found)
    assert [c.model.family for c in found] == [Family.MAXIMUM_ENTROPY, Family.MIXED] * 2
    assert [c.model.information for c in found] == [Information.DENSITY] * 2 + [Information.DEGREES] * 2


def test_the_form_of_a_negative_binomial_comes_from_the_study() -> None:
    written = POISSON.replace('"P"', '"NB1"').replace('"poisson"', '"negative_binomial"\nform = 1')
    plain = POISSON.replace('"poisson"', '"negative_binomial"')
    models = [c.model for c in study(HEAD + plain + written).candidates]
    assert models == [
        NegativeBinomialModel(("origin_size", "distance"), form=2),
        NegativeBinomialModel(("origin_size", "distance"), form=1),
    ]


# Each broken study, and the words that its one sentence must hold.
BROKEN = {
    "no TOML": ("title = = 1", ["study.toml", "not valid TOML", "line 1"]),
    "missing title": ((HEAD + POISSON).replace('title = "t"', ""), ["title", "required"]),
    "unknown top key": ("tittle = 1\n" + HEAD + POISSON, ["tittle", "'title'"]),
    "unknown data key": (
        (HEAD + POISSON).replace('dataset = "islands"', 'dataset = "islands"\ndirectd = true'),
        ["data", "directd", "'directed'"],
    ),
    "wrong type": ((HEAD + POISSON).replace("seed = 1", 'seed = "one"'), ["seed", "integer", "'one'"]),
    "bad unit": (
        (HEAD + POISSON).replace('dataset = "islands"', 'dataset = "islands"\nunit = 0.0'),
        ["unit", "greater than 0", "0.0"],
    ),
    "unknown data set": (
        HEAD.replace('"islands"', '"island"') + POISSON,
        ["data set", "'island'", "'islands'"],
    ),
    "unknown period": (
        (HEAD + POISSON).replace('dataset = "islands"', 'dataset = "islands"\nperiod = 1999'),
        ["period", "1999", "2029"],
    ),
    "no data": ((HEAD + POISSON).replace('dataset = "islands"', ""), ["dataset", "flows"]),
    "no candidates": (HEAD, ["candidates", "required"]),
    "a form that there is not": (
        HEAD + POISSON.replace('"poisson"', '"negative_binomial"\nform = 3'),
        ["form of a negative binomial", "1", "2", "got 3"],
    ),
    "a form that is a word": (
        HEAD + POISSON.replace('"poisson"', '"negative_binomial"\nform = "one"'),
        ["'form'", "integer", "'one'"],
    ),
    "unknown model": (
        HEAD + POISSON.replace('"poisson"', '"poison"'),
        ["candidates 1", "'P'", "poison", "'poisson'"],
    ),
    "unknown covariate of the inflation": (
        HEAD + ZIP + 'inflation = ["distanc"]\n',
        ["candidates 1", "no covariate 'distanc'", "did you mean 'distance'"],
    ),
    "unknown specification of the inflation": (
        HEAD + ZIP + 'inflation = "gravit"\n',
        ["candidates 1", "no specification 'gravit'", "did you mean 'gravity'"],
    ),
    "another form": (
        HEAD + POISSON.replace("poisson", "negative_binomial") + "form = 3\n",
        ["candidates 1", "must be 1", "or 2", "got 3"],
    ),
    "unknown option": (HEAD + POISSON + "speed = 3\n", ["candidates 1", "no option 'speed'"]),
    "no covariates": (
        HEAD + POISSON.replace('covariates = "gravity"', ""),
        ["'poisson'", "needs covariates"],
    ),
    "unneeded covariates": (
        HEAD + POISSON.replace('"poisson"', '"density"'),
        ["'density'", "takes no covariates"],
    ),
    "unknown specification": (HEAD + POISSON.replace('"gravity"', '"gravty"'), ["gravty", "'gravity'"]),
    "unknown covariate": (
        HEAD + POISSON.replace('"gravity"', '["distanse"]'),
        ["candidates 1", "distanse", "'distance'"],
    ),
    "covariate twice": (HEAD + POISSON.replace('"gravity"', '["same", "same"]'), ["twice"]),
    "bad specification": (
        (HEAD + POISSON).replace('["origin_size", "distance"]', '["origin_size", "distnce"]'),
        ["specifications.gravity", "distnce", "'distance'"],
    ),
    "labels repeat": (HEAD + POISSON + POISSON, ["'P'", "more than once"]),
    "half a candidate": (
        HEAD + '[[candidates]]\nlabel = "x"\nlinks = { model = "density" }\n',
        ["both links", "weights"],
    ),
    "wrong part": (
        HEAD
        + '[[candidates]]\nlabel = "x"\nlinks = { model = "geometric" }\nweights = { model = "geometric" }\n',
        ["links part", "'geometric'", "weights"],
    ),
    "both forms": (HEAD + POISSON + 'links = { model = "density" }\n', ["either model"]),
    "no source of a covariate": (
        HEAD.replace('{ dyad = "sea_distance", transform = "log" }', '{ transform = "log" }') + POISSON,
        ["covariates.distance", "exactly one"],
    ),
    "no end": (HEAD.replace(', end = "origin"', "") + POISSON, ["covariates.origin_size", "end"]),
    "bad end": (HEAD.replace('"origin"', '"orign"') + POISSON, ["end", "'origin'", "'orign'"]),
    "unknown column": (
        HEAD.replace('"throughput"', '"thruput"') + POISSON,
        ["origin_size", "thruput", "'throughput'"],
    ),
    "text column": (HEAD.replace('"throughput"', '"archipelago"') + POISSON, ["archipelago", "numbers"]),
    "undirected origin": (
        (HEAD + POISSON).replace('dataset = "islands"', 'dataset = "islands"\ndirected = false'),
        ["origin_size", "undirected", "both"],
    ),
    "unknown scheme": (HEAD + POISSON + '[[validation]]\nscheme = "dyad"\n', ["scheme", "'dyad'", "'dyads'"]),
    "one fold": (HEAD + POISSON + '[[validation]]\nscheme = "dyads"\nfolds = 1\n', ["folds", "2"]),
    "statistics": (HEAD + POISSON + "[statistics]\ndraws = 10\n", ["statistics", "not available"]),
    "unknown format": (HEAD + POISSON + '[report]\nformats = ["pdf"]\n', ["formats", "'html'", "pdf"]),
}


@pytest.mark.parametrize("case", BROKEN)
def test_bad_input_is_one_sentence(case: str) -> None:
    text, words = BROKEN[case]
    (sentence,) = problems(text)
    assert not [word for word in words if word not in sentence], sentence
    assert "Error" not in sentence
    assert "pydantic" not in sentence


def test_several_problems_are_told_at_once() -> None:
    text = (
        HEAD
        + POISSON.replace('"poisson"', '"poison"')
        + POISSON.replace('"P"', '"Q"').replace("gravity", "g")
    )
    assert len(problems(text)) == 2


def test_a_missing_study_file(tmp_path: Path) -> None:
    with pytest.raises(SteelyardError, match="no such study file"):
        load_study(tmp_path / "none.toml")


def test_own_files_are_found_beside_the_study(tmp_path: Path) -> None:
    (tmp_path / "flows.csv").write_text("from,to,tonnes\nNA,B,3\nB,C,2\nC,NA,1\n")
    (tmp_path / "places.csv").write_text("id,mass\nNA,1\nB,2\nC,4\n")
    (tmp_path / "study.toml").write_text(
        """
title = "own"
seed = 1
[data]
flows = "flows.csv"
nodes = "places.csv"
columns = { origin = "from", destination = "to", flow = "tonnes", node = "id" }
[covariates]
mass = { node = "mass", end = "both", transform = "log" }
[[candidates]]
model = "poisson"
covariates = ["mass"]
"""
    )
    found = load_study(tmp_path / "study.toml")
    assert found.network.labels == ("NA", "B", "C")
    assert found.network.total == 6.0
    assert found.candidates[0].label == "poisson"
