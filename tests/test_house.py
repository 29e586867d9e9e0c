"""What keeps the house in order: fixed names at the top, one demo config, short modules, import contracts."""

from __future__ import annotations

import ast
import subprocess
import tomllib
from pathlib import Path

import pytest

TOP = Path(__file__).parents[1]
CODE = [path for part in ("src", "flows") for path in sorted((TOP / part).rglob("*.py"))]
PROJECT = tomllib.loads((TOP / "pyproject.toml").read_text(encoding="utf-8"))
LAYERS = next(c["layers"] for c in PROJECT["tool"]["importlinter"]["contracts"] if c["type"] == "layers")


def tracked() -> list[str]:
    """Return the paths that belong to the project; what a working folder gathers besides is no part of it."""
    done = subprocess.run(["git", "ls-files"], cwd=TOP, capture_output=True, text=True, check=False)
    if done.returncode:
        pytest.skip("this is no git checkout")
    return done.stdout.splitlines()


def test_the_top_level_holds_only_the_fixed_names() -> None:
    names = {path.split("/")[0] for path in tracked()}
    assert names <= {
        ".ci",
        ".gitignore",
        "DEVELOPERS.md",
        "README.md",
        "config",
        "flows",
        "pyproject.toml",
        "reports",
        "src",
        "tests",
    }


@pytest.mark.parametrize("name", ["review.toml", "panel.toml"])
def test_the_config_at_the_top_is_the_one_of_the_invented_demo(name: str) -> None:
    inside = TOP / "src" / "treering" / "demo" / "config" / name
    outside = TOP / "config" / name
    assert outside.is_symlink()
    assert outside.resolve() == inside.resolve()
    assert outside.read_bytes() == inside.read_bytes()


def test_the_demo_says_that_it_is_invented() -> None:
    review = tomllib.loads((TOP / "config" / "review.toml").read_text(encoding="utf-8"))
    assert review["review"]["invented"] is True
    assert "invented" in review["review"]["title"]


@pytest.mark.parametrize("path", CODE, ids=lambda path: str(path.relative_to(TOP)))
def test_no_module_is_longer_than_350_lines(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 350


def packages(layer: str) -> list[str]:
    return [name.strip() for name in layer.split("|")]


def test_every_package_has_its_place_in_the_import_order() -> None:
    placed = {name for layer in LAYERS for name in packages(layer)}
    own = {
        f"treering.{path.stem}"
        for path in (TOP / "src" / "treering").iterdir()
        if path.name not in ("__init__.py", "__main__.py", "py.typed")
        and not path.name.startswith(("__", "."))
    }
    assert own | {"treering_flows"} == placed


@pytest.mark.parametrize(
    "rule", ["only flows know Prefect", "only the store knows SQLModel", "the numeric packages"]
)
def test_the_rules_of_the_house_are_import_contracts(rule: str) -> None:
    assert any(c["name"].startswith(rule) for c in PROJECT["tool"]["importlinter"]["contracts"])


def imported(path: Path) -> set[str]:
    """Return the names of the modules that a file imports, wherever in the file it does."""
    names = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            names.add(node.module)
    return names


def test_only_flows_import_the_engine() -> None:
    users = {
        path.relative_to(TOP).parts[0]
        for path in CODE
        if any(n.split(".")[0] == "prefect" for n in imported(path))
    }
    assert users == {"flows"}


def test_only_the_commands_print() -> None:
    for path in CODE:
        if path.relative_to(TOP).parts[:3] == ("src", "treering", "cli"):
            continue
        calls = [
            node
            for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
            if isinstance(node, ast.Call)
        ]
        assert not [c for c in calls if isinstance(c.func, ast.Name) and c.func.id == "print"], path


def test_only_commands_and_flows_read_the_clock() -> None:
    for path in CODE:
        parts = path.relative_to(TOP).parts
        if parts[0] == "flows" or parts[:3] == ("src", "treering", "cli"):
            continue
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            clock = isinstance(node, ast.Attribute) and node.attr in ("now", "today", "utcnow")
            assert not clock, f"{path.relative_to(TOP)}:{node.lineno}"
