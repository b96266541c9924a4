"""A distribution from outside brings a layout, a reading and an overlay; broken ones are named and do no harm."""

from __future__ import annotations

import csv
import json
import os
import site
import subprocess
import sys
import sysconfig
import textwrap
import venv
from pathlib import Path

import pytest

OUTSIDE = Path(__file__).parent / "outside_distribution"


class ScratchEnvironment:
    """A fresh virtual environment that sees this one's packages and has outside distributions besides."""

    def __init__(self, folder: Path) -> None:
        venv.create(folder, with_pip=False, symlinks=os.name != "nt")
        self.python = folder / ("Scripts" if os.name == "nt" else "bin") / Path(sys.executable).name
        if not self.python.exists():
            self.python = self.python.with_name("python")
        packages = Path(
            sysconfig.get_path("purelib", vars={"base": str(folder), "platbase": str(folder)}, scheme="venv")
        )
        ours = {sysconfig.get_path("purelib"), sysconfig.get_path("platlib")}
        if site.ENABLE_USER_SITE:
            ours.add(site.getusersitepackages())
        lines = "".join(f"import site; site.addsitedir({path!r})\n" for path in sorted(ours))
        (packages / "seen.pth").write_text(lines)

    def install(self, source: Path) -> None:
        command = ["-m", "pip", "--python", str(self.python), "install", "--quiet", "--no-index", "--no-deps"]
        done = subprocess.run(
            [sys.executable, *command, "--no-build-isolation", str(source)], capture_output=True, text=True
        )
        assert done.returncode == 0, done.stderr

    def run(self, *words: str, cwd: Path) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [str(self.python), "-m", "knucklepath.viewer", *words], capture_output=True, text=True, cwd=cwd
        )


def distribution(folder: Path, name: str, module: str, code: str) -> Path:
    """Write the source of a small plugin distribution."""
    folder.mkdir()
    (folder / f"{module}.py").write_text(textwrap.dedent(code))
    (folder / "pyproject.toml").write_text(
        textwrap.dedent(f"""
            [build-system]
            requires = ["setuptools>=77"]
            build-backend = "setuptools.build_meta"
            [project]
            name = "{name}"
            version = "0.1"
            [project.entry-points.knucklepath]
            plugin = "{module}"
            [tool.setuptools]
            py-modules = ["{module}"]
            """)
    )
    return folder


@pytest.fixture(scope="module")
def scratch(tmp_path_factory: pytest.TempPathFactory) -> ScratchEnvironment:
    folder = tmp_path_factory.mktemp("outside")
    environment = ScratchEnvironment(folder / "environment")
    # built from a copy, so that the build leaves nothing in the tree
    copy = folder / "source"
    copy.mkdir()
    for path in OUTSIDE.iterdir():
        if path.is_file():
            (copy / path.name).write_bytes(path.read_bytes())
    environment.install(copy)
    return environment


def test_an_outside_layout_makes_a_project_that_sweeps_draws_and_checks(
    scratch: ScratchEnvironment, tmp_path: Path
) -> None:
    made = scratch.run("new", "rear", "--layout", "trailing-arm", cwd=tmp_path)
    assert made.returncode == 0, made.stderr
    swept = scratch.run("sweep", "rear", "--csv", "sweep.csv", cwd=tmp_path)
    assert swept.returncode == 0, swept.stderr
    rows = list(csv.DictReader((tmp_path / "sweep.csv").open()))
    assert len(rows) >= 11
    angles = [float(row["arm_angle_deg"]) for row in rows]
    assert max(angles) > 3.0
    drawn = scratch.run(
        "picture", "rear", "rear.png", "--show", "arm-pivot-line,wheel-path", "--size", "480x360", cwd=tmp_path
    )
    assert drawn.returncode == 0, drawn.stderr
    assert (tmp_path / "rear.png").read_bytes().startswith(b"\x89PNG")
    checked = scratch.run("clearance", "rear", "--json", "gaps.json", cwd=tmp_path)
    assert checked.returncode in (0, 1), checked.stderr
    pairs = json.loads((tmp_path / "gaps.json").read_text())["pairs"]
    assert pairs
    assert checked.returncode == int(any(pair["verdict"] != "clear" for pair in pairs))


def test_layouts_lists_the_outside_layout_with_its_distribution(scratch: ScratchEnvironment, tmp_path: Path) -> None:
    listed = scratch.run("layouts", cwd=tmp_path)
    assert listed.returncode == 0
    line = next(line for line in listed.stdout.splitlines() if line.strip().startswith("trailing-arm"))
    assert "paddock-trailing-arm" in line
    points = scratch.run("layouts", "trailing-arm", cwd=tmp_path)
    assert "brake_rod" in points.stdout


BROKEN = {
    "raises-at-import": ("raise RuntimeError('no gearbox oil')\n", "no gearbox oil"),
    "wrong-signature": (
        """
        from knucklepath.plugins import hookimpl
        @hookimpl
        def knucklepath_layouts(colour):
            return []
        """,
        "colour",
    ),
    "raises-when-called": (
        """
        from knucklepath.plugins import hookimpl
        @hookimpl
        def knucklepath_readings():
            return 1 / 0
        """,
        "division by zero",
    ),
    "taken-id": (
        """
        from dataclasses import replace
        from knucklepath.plugins import hookimpl
        from knucklepath.plugins.layouts.strut import LAYOUT
        @hookimpl
        def knucklepath_layouts():
            return [replace(LAYOUT, title="another")]
        """,
        "'strut' is taken",
    ),
    "fails-the-audit": (
        """
        from dataclasses import replace
        from knucklepath.plugins import hookimpl
        from knucklepath.plugins.layouts.double_a_arm import LAYOUT
        @hookimpl
        def knucklepath_layouts():
            return [replace(LAYOUT, id="loose", joints=LAYOUT.joints[:2])]
        """,
        "knuckle turns about its own ball joints",
    ),
    "wrong-thing": (
        """
        from knucklepath.plugins import hookimpl
        @hookimpl
        def knucklepath_layouts():
            return ["double-a-arm"]
        """,
        "brings a str where a Layout is expected",
    ),
    "newer-contract": ("KNUCKLEPATH_HOOK_CONTRACT = 99\n", "hook contract 99"),
}


@pytest.fixture(scope="module")
def scratch_with_broken(tmp_path_factory: pytest.TempPathFactory) -> ScratchEnvironment:
    folder = tmp_path_factory.mktemp("broken")
    environment = ScratchEnvironment(folder / "environment")
    for number, (name, (code, _)) in enumerate(BROKEN.items()):
        environment.install(distribution(folder / name, name, f"broken_plugin_{number}", code))
    return environment


def test_every_broken_plugin_is_named_with_its_reason_and_the_rest_works(
    scratch_with_broken: ScratchEnvironment, tmp_path: Path
) -> None:
    listed = scratch_with_broken.run("layouts", cwd=tmp_path)
    assert listed.returncode == 0, listed.stderr
    text = " ".join(listed.stdout.split())
    for layout in ("double-a-arm", "strut", "five-link", "semi-trailing-arm"):
        assert layout in text
    for name, (_, reason) in BROKEN.items():
        assert f"broken: {name}" in text
        assert reason in text
    made = scratch_with_broken.run("new", "front", "--layout", "strut", cwd=tmp_path)
    assert made.returncode == 0, made.stderr
    swept = scratch_with_broken.run("sweep", "front", "--csv", "-", cwd=tmp_path)
    assert swept.returncode == 0
    assert swept.stdout.startswith("travel_mm,rack_mm,camber_deg")
