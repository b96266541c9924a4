"""``knucklepath envelope`` as a user meets it: the file, the figures, and what wrong words give."""

from __future__ import annotations

import argparse
import re
from pathlib import Path

import numpy as np
import pytest
import trimesh

from knucklepath.kinematics.motion import solve_motion
from knucklepath.viewer import CAUTION
from knucklepath.viewer.commands.arguments import UsageError
from knucklepath.viewer.commands.envelope import run
from knucklepath.viewer.project import load_project


def options(project: Path, out: Path, **words: str) -> argparse.Namespace:
    given = {"part": "knuckle casting", "on": "chassis", "margin": "1.0", **words}
    return argparse.Namespace(project=str(project), out=str(out), allow_plugins=False, **given)


def test_it_writes_a_watertight_mesh_and_says_how_large_it_is(
    full_project: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "sweep.stl"
    assert run(options(full_project, out)) == 0
    said = capsys.readouterr().out
    assert CAUTION in said
    mesh = trimesh.load(out)
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    litres = re.search(r"volume ([\d.]+) litres", said)
    assert litres is not None
    assert float(litres[1]) == pytest.approx(mesh.volume / 1e6, abs=0.006)
    assert f"{len(mesh.faces):,} triangles" in said
    project = load_project(full_project)
    part = next(solid for solid in project.solids() if solid.name == "knuckle casting")
    motion = solve_motion(project.corner, [-50.0, 3.3, 60.0, 60.0], [-35.0, 12.1, 35.0, -35.0])
    points = (
        np.einsum("nij,pj->npi", motion.rotation("knuckle"), part.vertices) + motion.translation("knuckle")[:, None]
    )
    assert trimesh.proximity.signed_distance(mesh, points.reshape(-1, 3)).min() >= 1.0


def test_on_its_own_body_with_a_larger_margin_the_mesh_is_the_part_fattened(full_project: Path, tmp_path: Path) -> None:
    out = tmp_path / "still.stl"
    assert run(options(full_project, out, on="knuckle", margin="6")) == 0
    part = next(solid for solid in load_project(full_project).solids() if solid.name == "knuckle casting")
    low, high = trimesh.load(out).bounds
    assert (low <= part.vertices.min(axis=0) - 6.0).all()
    assert (high >= part.vertices.max(axis=0) + 6.0).all()
    assert (high - low <= np.ptp(part.vertices, axis=0) + 2.0 * 9.0).all()


@pytest.mark.parametrize(
    ("words", "message"),
    [
        ({"part": "knuckle castin"}, "did you mean 'knuckle casting'"),
        ({"on": "lower_arn"}, "did you mean 'lower_arm'"),
        ({"margin": "-1"}, "--margin"),
        ({"margin": "wide"}, "'wide' is not a number"),
    ],
)
def test_wrong_words_are_refused_with_what_would_be_right(
    words: dict[str, str], message: str, full_project: Path, tmp_path: Path
) -> None:
    out = tmp_path / "never.stl"
    with pytest.raises(UsageError, match=message):
        run(options(full_project, out, **words))
    assert not out.exists()


def test_only_stl_is_written(full_project: Path, tmp_path: Path) -> None:
    with pytest.raises(UsageError, match=r"ends in \.stl"):
        run(options(full_project, tmp_path / "sweep.obj"))
