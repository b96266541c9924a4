"""The distribution holds what the tree holds."""

from __future__ import annotations

import tomllib
from pathlib import Path

ROOT = Path(__file__).parents[1]
ROOMS = ("kinematics", "plugins", "viewer", "assets")


def test_every_package_of_the_tree_is_listed_and_typed() -> None:
    listed = set(tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]["packages"])
    found = {
        "knucklepath." + ".".join(path.parent.relative_to(ROOT).parts)
        for room in ROOMS
        for path in (ROOT / room).rglob("__init__.py")
    }
    assert listed == found
    for package in found:
        folder = ROOT.joinpath(*package.split(".")[1:])
        assert (folder / "py.typed").exists(), f"{package} has no py.typed"


def test_a_file_imports_only_from_the_rooms_above() -> None:
    forbidden = {"kinematics": ("plugins", "viewer", "assets"), "plugins": ("viewer", "assets")}
    for room, below in forbidden.items():
        for path in (ROOT / room).rglob("*.py"):
            text = path.read_text()
            for other in below:
                assert f"knucklepath.{other}" not in text, f"{path.relative_to(ROOT)} knows {other}"


def test_pixels_stay_in_the_viewer() -> None:
    for room in ("kinematics", "plugins"):
        for path in (ROOT / room).rglob("*.py"):
            for line in path.read_text().splitlines():
                assert not line.strip().startswith(("import pyvista", "from pyvista", "import vtk", "from vtk"))


def test_nothing_compiled_needs_what_is_not_installed_with_the_program() -> None:
    """numba's linear algebra needs scipy, which only the tests have."""
    for room in ROOMS[:3]:
        for path in (ROOT / room).rglob("*.py"):
            text = path.read_text()
            if "import compiled" in text:
                assert "np.linalg" not in text.split("@compiled", 1)[-1], path.relative_to(ROOT)
