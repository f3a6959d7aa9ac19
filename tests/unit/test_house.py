"""The rules of the house, as tests."""

import ast
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

from hjsolve.motion.inversions import INVERSIONS
from hjsolve.quadrature import FAMILIES
from hjsolve.writing import WRITERS

ROOT = Path(__file__).parents[2]
BELOW = {"algebra", "records", "errors"}
SOURCES = sorted((ROOT / "hjsolve").rglob("*.py")) + sorted((ROOT / "api").rglob("*.py"))


def imported(path):
    """(module, whether at the top of the file) for every import of a file."""
    tree = ast.parse(path.read_text("utf-8"))
    typing = [
        n.body for n in tree.body if isinstance(n, ast.If) and "TYPE_CHECKING" in ast.dump(n.test)
    ]
    top = set(map(id, [*tree.body, *(n for body in typing for n in body)]))
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((a.name, id(node) in top) for a in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            yield node.module, id(node) in top


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(ROOT)))
def test_imports_go_down_only(path):
    parts = path.relative_to(ROOT).parts
    for module, _ in imported(path):
        if parts[0] == "hjsolve":
            assert module.split(".")[0] not in {"api", "fastapi", "pydantic", "uvicorn"}
        inside = module.split(".")
        if parts[0] == "hjsolve" and len(parts) > 2 and inside[0] == "hjsolve" and inside[1:]:
            assert inside[1] in BELOW | {parts[1]}, f"{path} imports a sibling: {module}"


@pytest.mark.parametrize("path", SOURCES, ids=lambda p: str(p.relative_to(ROOT)))
def test_imports_stand_at_the_top(path):
    assert all(top for _, top in imported(path))


@pytest.mark.parametrize("registry", [FAMILIES, INVERSIONS, WRITERS], ids=["f", "i", "w"])
def test_a_registry_entry_tells_its_name_and_source(registry):
    names = [entry.name for entry in registry]
    assert isinstance(registry, tuple)
    assert len(set(names)) == len(names)
    assert all(entry.source for entry in registry)


def blocks(text):
    """The ``sh`` blocks of a page."""
    return [part.split("```")[0].strip() for part in text.split("```sh\n")[1:]]


def test_the_readme_has_its_two_commands():
    found = blocks((ROOT / "README.md").read_text("utf-8"))
    assert len(found) == 2
    assert all("\n" not in line and line.startswith("python3 -m venv .venv && ") for line in found)
    sample = found[0].split()[-1]
    assert (ROOT / sample).is_file()
    assert found[1].endswith("-m pytest -q")


def test_the_python_example_of_the_readme_runs():
    text = (ROOT / "README.md").read_text("utf-8")
    code = text.split("```python\n")[1].split("```")[0]
    run = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, check=True
    )
    assert run.stdout.startswith("complete\nx = ")


def test_every_setting_is_in_the_readme():
    readme = (ROOT / "README.md").read_text("utf-8")
    settings = (ROOT / "api/settings.py").read_text("utf-8")
    names = {w.strip("`|., ") for w in settings.split() if "HJSOLVE_" in w}
    assert names
    assert all(
        f"`{name}`" in readme for name in names if name.isidentifier() and name != "HJSOLVE_"
    )


def test_dependencies_are_explained():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]
    page = (ROOT / "DEVELOPERS.md").read_text("utf-8").split("## Dependencies")[1]
    wanted = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    for requirement in wanted:
        name = requirement.split(">")[0].split("=")[0]
        assert name in page, name
