"""A starter project of any layout opens, moves and checks at once, and never harms what is there."""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from knucklepath.kinematics.clearance.pairs import pairs_to_check
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.errors import ProjectError
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import solve_motion
from knucklepath.plugins.registry import Registry
from knucklepath.viewer.project import load_project
from knucklepath.viewer.starter import make_starter


def test_a_starter_opens_with_its_parts_and_moves_over_its_limits(
    layout: Layout, tmp_path: Path, registry: Registry
) -> None:
    path = make_starter(tmp_path / "axle", layout, registry)
    project = load_project(tmp_path / "axle", registry)
    assert path == tmp_path / "axle" / "axle.toml"
    assert project.layout.id == layout.id
    assert len(project.parts) == 3
    assert all(part.mesh.suffix == ".stl" and part.dropped_triangles == 0 for part in project.parts)
    for name, point in layout.example.items():
        assert tuple(project.corner.point(name)) == point
    travel = np.linspace(-project.rebound, project.bump, 7)
    rack = np.linspace(-1.0, 1.0, 3) * (project.rack_each_way or 0.0)
    assert solve_motion(project.corner, travel[:, None], rack[None, :]).reached.all()
    assert project.bump >= 20.0
    assert (project.rack_each_way is not None) == layout.steers


def test_a_starter_has_pairs_to_check_and_all_of_them_stay_apart(
    layout: Layout, sound_project: Callable[[str], Path], registry: Registry
) -> None:
    project = load_project(sound_project(layout.id), registry)
    travel = np.array([-project.rebound, 0.0, project.bump])
    rack = np.array([-1.0, 0.0, 1.0]) * (project.rack_each_way or 0.0)
    motion = solve_motion(project.corner, travel[:, None], np.unique(rack)[None, :])
    gaps = sampled_gaps(motion, pairs_to_check(project.corner, project.solids(), project.clearances))
    assert gaps
    for gap in gaps:
        assert gap.gap_mm > gap.required_mm > 0.0


def test_its_parts_are_closed_and_lie_at_the_corner(
    layout: Layout, sound_project: Callable[[str], Path], registry: Registry
) -> None:
    project = load_project(sound_project(layout.id), registry)
    for part in project.parts:
        edges = np.sort(part.faces[:, [0, 1, 1, 2, 2, 0]].reshape(-1, 2), axis=1)
        _, counts = np.unique(edges, axis=0, return_counts=True)
        assert (counts % 2 == 0).all()
        assert np.abs(part.vertices - project.corner.wheel.centre).max() < 900.0


def test_it_says_that_its_numbers_are_invented(sound_project: Callable[[str], Path]) -> None:
    text = sound_project("strut").read_text()
    assert "Every number in it is invented" in text
    assert "proves neither strength nor roadworthiness" in text
    # each point with its meaning
    assert "# centre of the top mount on the chassis" in text


def test_a_layout_from_outside_of_another_size_and_with_odd_names_works_too(tmp_path: Path, registry: Registry) -> None:
    arms = registry.layouts["double-a-arm"]
    small = {name: tuple(0.1 * value for value in point) for name, point in arms.example.items()}
    tenth = replace(arms, id="tenth-scale", title='Tenth "scale"', example=small)
    many = replace(registry, layouts={**registry.layouts, tenth.id: tenth})
    project = load_project(make_starter(tmp_path / "small", tenth, many), many)
    assert project.title == 'Starter: Tenth "scale"'
    assert project.corner.wheel.loaded_radius == pytest.approx(23.0)
    assert 1.0 < project.bump < 8.0


def test_a_folder_that_holds_something_is_left_alone(tmp_path: Path, registry: Registry) -> None:
    folder = tmp_path / "mine"
    folder.mkdir()
    (folder / "notes.txt").write_text("keep me")
    with pytest.raises(ProjectError, match="is not empty"):
        make_starter(folder, registry.layouts["strut"], registry)
    assert [item.name for item in folder.iterdir()] == ["notes.txt"]
    with pytest.raises(ProjectError, match="is a file"):
        make_starter(folder / "notes.txt", registry.layouts["strut"], registry)
    assert (folder / "notes.txt").read_text() == "keep me"
    assert [item.name for item in tmp_path.iterdir()] == ["mine"]


def test_an_empty_folder_and_missing_parents_are_used(tmp_path: Path, registry: Registry) -> None:
    (tmp_path / "empty").mkdir()
    assert make_starter(tmp_path / "empty", registry.layouts["strut"], registry).is_file()
    assert make_starter(tmp_path / "a" / "b", registry.layouts["strut"], registry).is_file()
    assert sorted(item.name for item in tmp_path.iterdir()) == ["a", "empty"]


def test_the_folder_is_open_to_whom_new_folders_are(tmp_path: Path, registry: Registry) -> None:
    old = os.umask(0o027)
    try:
        make_starter(tmp_path / "axle", registry.layouts["strut"], registry)
    finally:
        os.umask(old)
    assert (tmp_path / "axle").stat().st_mode & 0o777 == 0o750


def test_a_layout_whose_example_is_unsound_leaves_nothing_behind(tmp_path: Path, registry: Registry) -> None:
    strut = registry.layouts["strut"]
    inches = {name: tuple(value / 254.0 for value in point) for name, point in strut.example.items()}
    unsound = replace(strut, id="speck", example=inches)
    many = replace(registry, layouts={**registry.layouts, "speck": unsound})
    with pytest.raises(ProjectError, match="the example of layout 'speck' makes no sound project"):
        make_starter(tmp_path / "axle", unsound, many)
    assert list(tmp_path.iterdir()) == []
