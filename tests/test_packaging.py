"""The wheel holds all that a review needs: it works from any folder, where no source tree is near."""

from __future__ import annotations

import os
import subprocess
import sys
import sysconfig
import venv
import zipfile
from pathlib import Path
from typing import Any

import pytest

pytestmark = pytest.mark.slow

TOP = Path(__file__).parents[1]
TREERING = "from treering.cli import main; main()"


def pip(*arguments: object) -> None:
    command = [sys.executable, "-m", "pip", "--disable-pip-version-check", *map(str, arguments)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Build the wheel as `pip install .` does."""
    target = tmp_path_factory.mktemp("wheel")
    pip("wheel", "--quiet", "--no-deps", "--no-build-isolation", "--wheel-dir", target, TOP)
    (built,) = target.glob("treering-*.whl")
    return built


@pytest.fixture(scope="module")
def python(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Make an environment that sees the libraries of this one, and of treering the wheel alone.

    A .pth file that stands in a folder named by another .pth file is not read, so the editable install of
    this environment does not show through.
    """
    place = tmp_path_factory.mktemp("elsewhere") / "venv"
    venv.create(place, with_pip=False)
    (packages,) = place.glob("lib/python*/site-packages")
    (packages / "libraries.pth").write_text(sysconfig.get_path("purelib") + "\n")
    pip("install", "--quiet", "--no-deps", "--no-compile", "--target", packages, wheel)
    return place / "bin" / "python"


def run(python: Path, code: str, *arguments: object, cwd: Path) -> subprocess.CompletedProcess[str]:
    """Run code in the new environment, with an engine home of its own."""
    kept = {n: v for n, v in os.environ.items() if not n.startswith(("PREFECT", "PYTHON"))}
    return subprocess.run(
        [python, "-c", code, *map(str, arguments)],
        capture_output=True,
        text=True,
        timeout=300,
        cwd=cwd,
        env={**kept, "PREFECT_HOME": str(python.parents[1] / "engine")},
        check=False,
    )


def test_every_file_of_the_packages_is_in_the_wheel(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as file:
        packed = set(file.namelist())
    for folder in (TOP / "src", TOP / "flows"):
        for path in folder.rglob("*"):
            name = path.relative_to(folder)
            if path.is_file() and "__pycache__" not in name.parts and not name.name.startswith("."):
                assert str(name) in packed
    assert not [name for name in packed if name.startswith("tests")]


def test_the_wheel_brings_the_command(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as file:
        (entry,) = (name for name in file.namelist() if name.endswith("entry_points.txt"))
        assert "treering = treering.cli:main" in file.read(entry).decode()


def test_nothing_is_taken_from_the_source_tree(python: Path, tmp_path: Path) -> None:
    done = run(
        python,
        "import treering, treering_flows; print(treering.__file__, treering_flows.__file__)",
        cwd=tmp_path,
    )
    assert done.returncode == 0, done.stderr
    for place in done.stdout.split():
        assert Path(place).is_relative_to(python.parents[1])


def test_a_new_review_starts_anywhere(python: Path, tmp_path: Path) -> None:
    done = run(python, TREERING, "start", "new", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert (
        (tmp_path / "new" / "config" / "review.toml").read_text().startswith("# The protocol of this review.")
    )


def test_the_demo_config_travels(python: Path, tmp_path: Path) -> None:
    code = (
        "import sys; from pathlib import Path; from treering.demo import lay_out; lay_out(Path(sys.argv[1]))"
    )
    done = run(python, code, "demo", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    for name in ("review.toml", "panel.toml"):
        assert (tmp_path / "demo" / "config" / name).read_bytes() == (TOP / "config" / name).read_bytes()


def test_check_and_update_work_in_a_folder_elsewhere(python: Path, review: Any) -> None:
    review.drop_pair("T1", (24, 110, 33, 108))
    review.drop_pair("T2", (30, 140, 41, 138))
    checked = run(python, TREERING, "check", cwd=review.folder)
    assert checked.returncode == 0, checked.stderr
    assert "An update would lay down a new version." in checked.stdout
    updated = run(python, TREERING, "update", cwd=review.folder)
    assert (updated.returncode, updated.stderr) == (0, "")
    assert updated.stdout.splitlines()[0] == "version 1"
    assert review.report(1)["syntheses"][0]["k"] == 2
    (page,) = review.folder.glob("reports/*-v001/index.html")
    assert page.stat().st_size > 10_000
