"""README and DEVELOPERS.md say what is so: their commands and their example model are run."""

from __future__ import annotations

import re
from pathlib import Path

from steelyard.benchmark.cli import main
from steelyard.datasets import Entry
from steelyard.models import model_registry
from steelyard.models.checks import ExampleFlows, checks_for

ROOT = Path(__file__).parents[1]


def blocks(file: str, language: str) -> list[str]:
    text = (ROOT / file).read_text(encoding="utf-8")
    return re.findall(rf"^```{language}\n(.*?)^```$", text, flags=re.MULTILINE | re.DOTALL)


def test_the_example_model_passes_the_battery() -> None:
    code = blocks("DEVELOPERS.md", "python")[0]
    lines = [line for line in code.splitlines() if line.strip()]
    assert len(lines) < 30
    names: dict[str, object] = {}
    exec(code, names)  # the block is ours
    registry = model_registry().adding("uniform", Entry("the document", lambda: names["Uniform"]))
    model = registry.get("uniform")()
    for directed in model.directed:
        for check in checks_for(model):
            check(model, ExampleFlows(directed))


def test_the_first_two_commands_do_their_own_set_up() -> None:
    demo, tests = blocks("README.md", "bash")[:2]
    assert "python3 -m venv" in demo
    assert "steelyard demo" in demo
    assert "python3 -m venv" in tests
    assert "pytest" in tests


def test_the_study_in_the_readme_is_a_valid_one(tmp_path: Path, capsys) -> None:
    """Alone, and with the candidates of the second block, which are written to follow it."""
    study, more = blocks("README.md", "toml")
    for text in (study, study + more):
        (tmp_path / "study.toml").write_text(text, encoding="utf-8")
        assert main(["check", str(tmp_path / "study.toml")]) == 0
        assert "fits in all" in capsys.readouterr().out


def test_pictures_exist() -> None:
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    pictures = re.findall(r"!\[[^\]]+\]\(([^)]+)\)", text)
    assert pictures
    assert all((ROOT / picture).is_file() for picture in pictures)
