"""The console: statuses, what it prints, what it leaves, and what it refuses to touch."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from steelyard.benchmark.cli import main


@pytest.fixture
def small_file(tmp_path: Path, small_text: str) -> Path:
    path = tmp_path / "small.toml"
    path.write_text(small_text, encoding="utf-8")
    return path


def run(*words: object) -> int:
    return main([str(w) for w in words])


def test_run_leaves_what_it_promises(small_file: Path, tmp_path: Path, capsys) -> None:
    place = tmp_path / "out"
    assert run("run", small_file, "-o", place, "--jobs", 1, "--quiet") == 0
    tables = {p.name for p in (place / "tables").iterdir()}
    assert tables == {
        "candidates.csv",
        "criteria.csv",
        "estimates.csv",
        "scores.csv",
        "tests.csv",
        "outcomes.csv",
    }
    assert (place / "study.toml").read_text() == small_file.read_text()
    about = json.loads((place / "provenance.json").read_text())
    assert len(about["tasks"]) == 12
    assert about["data"]["digest"]
    assert "Degrees, geometric" in capsys.readouterr().out


def test_two_runs_leave_the_same_bytes(small_file: Path, tmp_path: Path) -> None:
    for name in ("a", "b"):
        assert run("run", small_file, "-o", tmp_path / name, "--jobs", 1, "--quiet") == 0
    files = sorted(p.relative_to(tmp_path / "a") for p in (tmp_path / "a" / "tables").iterdir())
    assert len(files) == 6
    for file in files:
        assert (tmp_path / "a" / file).read_bytes() == (tmp_path / "b" / file).read_bytes()


def test_report_writes_the_same_tables_again(small_file: Path, tmp_path: Path) -> None:
    place = tmp_path / "out"
    run("run", small_file, "-o", place, "--jobs", 1, "--quiet")
    before = {p.name: p.read_bytes() for p in (place / "tables").iterdir()}
    for path in (place / "tables").iterdir():
        path.unlink()
    assert run("report", place) == 0
    assert {p.name: p.read_bytes() for p in (place / "tables").iterdir()} == before


@pytest.mark.parametrize("words", [["report"], ["run", "{study}", "-o"]], ids=["report", "run"])
def test_a_directory_of_something_else_is_left_alone(words, small_file: Path, tmp_path: Path, capsys) -> None:
    place = tmp_path / "thesis"
    place.mkdir()
    (place / "chapter.txt").write_text("years of work")
    assert run(*[w.format(study=small_file) for w in words], place) == 2
    assert [p.name for p in place.iterdir()] == ["chapter.txt"]
    assert capsys.readouterr().err.count("\n") == 1


def test_a_file_in_place_of_a_directory(small_file: Path, tmp_path: Path, capsys) -> None:
    assert run("run", small_file, "-o", small_file) == 2
    assert "is a file" in capsys.readouterr().err


BAD = {
    "no study": (["check", "none.toml"], "no such study file"),
    "unknown model": (["models", "poison"], "'poisson'"),
    "unknown data set": (["datasets", "iland"], "'islands'"),
    "no run": (["report", "nowhere"], "ledger.sqlite"),
}


@pytest.mark.parametrize("case", BAD)
def test_bad_input_has_status_two_and_no_traceback(case: str, capsys, monkeypatch, tmp_path: Path) -> None:
    monkeypatch.chdir(tmp_path)
    words, said = BAD[case]
    assert run(*words) == 2
    error = capsys.readouterr().err
    assert said in error
    assert error.startswith("steelyard: ")
    assert "Traceback" not in error
    assert list(tmp_path.iterdir()) == []


def test_bad_data_names_file_row_and_column(tmp_path: Path, capsys) -> None:
    (tmp_path / "f.csv").write_text("origin,destination,flow\nA,B,1\nB,C,-4\nC,C,2\nA,D,x\n")
    (tmp_path / "s.toml").write_text(
        'title="t"\nseed=1\n[data]\nflows="f.csv"\n[[candidates]]\nmodel="geometric"\n', encoding="utf-8"
    )
    assert run("check", tmp_path / "s.toml") == 2
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) == 3
    assert "f.csv, row 3, column 'flow'" in "\n".join(lines)
    assert "f.csv, row 4" in "\n".join(lines)
    assert "f.csv, row 5, column 'flow'" in "\n".join(lines)


def test_check_says_what_a_run_would_do(small_file: Path, capsys) -> None:
    assert run("check", small_file) == 0
    said = capsys.readouterr().out
    assert "12 fits in all" in said
    assert "3,540 ordered pairs" in said
    lines = [line for line in said.splitlines() if "configuration" in line]
    assert lines
    assert all("degrees" in line for line in lines)


@pytest.mark.parametrize("name", ["poisson", "configuration", "lognormal"])
def test_a_method_sheet_is_complete(name: str, capsys) -> None:
    assert run("models", name) == 0
    said = capsys.readouterr().out
    for label in ("assumes", "formula", "estimated", "scored on", "beware", "sources"):
        assert label in said


def test_lists(capsys) -> None:
    assert run("models") == 0
    assert run("datasets") == 0
    assert run("datasets", "islands") == 0
    said = capsys.readouterr().out
    for word in ("negative_binomial", "air-routes-2008", "sea_distance", "invented"):
        assert word in said


def test_some_failed_has_status_three(tmp_path: Path, capsys) -> None:
    (tmp_path / "f.csv").write_text("origin,destination,flow\nA,B,2\nB,C,4\nC,A,8\nA,C,4\n")
    (tmp_path / "n.csv").write_text("node,mass\nA,1\nB,2\nC,4\n")
    (tmp_path / "s.toml").write_text(
        """
title = "one fails"
seed = 1
[data]
flows = "f.csv"
nodes = "n.csv"
[covariates]
a = { node = "mass", end = "origin", transform = "log" }
b = { node = "mass", end = "destination", transform = "log" }
c = { node = "mass", end = "origin", transform = "square" }
[[candidates]]
label = "too many"
links = { model = "density" }
weights = { model = "geometric", covariates = ["a", "b", "c"] }
[[candidates]]
label = "fine"
links = { model = "density" }
weights = { model = "geometric" }
[report]
formats = ["csv"]
"""
    )
    assert run("run", tmp_path / "s.toml", "-o", tmp_path / "out", "--jobs", 1) == 3
    outcomes = (tmp_path / "out" / "tables" / "outcomes.csv").read_text()
    assert "too many,full,0,0,failed" in outcomes
    assert "fine,full,0,0,scored" in outcomes


def test_interruption_has_its_own_status(small_file: Path, tmp_path: Path, capsys, monkeypatch) -> None:
    def interrupted(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr("steelyard.benchmark.engine.execute", interrupted)
    assert run("run", small_file, "-o", tmp_path / "out", "--jobs", 1) == 130
    assert "goes on from there" in capsys.readouterr().err
