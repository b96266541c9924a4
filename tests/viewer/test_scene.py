"""The scene is a function of the state: actors stand where the motion says, and what is drawn is really there."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista

from knucklepath.kinematics.clearance.primitives import ball, cylinder, merged, tyre_ring
from knucklepath.kinematics.clearance.solids import RodStyle, Solid, generated_solids
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.kinematics.wheel import Corner
from knucklepath.plugins.overlays.glyphs import Arrow, Axis, Disc, Glyph, Line, Overlay, Ring, State
from knucklepath.plugins.registry import Registry
from knucklepath.viewer.glyph_shapes import dashes, screw_thread, shapes
from knucklepath.viewer.looks import look
from knucklepath.viewer.project import Project, load_project
from knucklepath.viewer.scene import Scene
from knucklepath.viewer.scene_outline import shared_edges
from knucklepath.viewer.scene_solids import DAMPER, DAMPER_ROD, SPRING, display_meshes, watertight
from knucklepath.viewer.theme import LIGHT, SEE_THROUGH, Theme, theme
from knucklepath.viewer.vtk_arrays import drawn_pixels

SIZE = (480, 270)


@pytest.fixture
def stage() -> Iterator[Any]:
    plotter = pyvista.Plotter(off_screen=True, window_size=SIZE, lighting="none")
    plotter.render_window.SetMultiSamples(0)
    yield plotter
    plotter.close()


@pytest.fixture
def project(sound_project: Callable[[str], Path], registry: Registry) -> Project:
    return load_project(sound_project("double-a-arm"), registry)


def path_of(project: Project) -> Motion:
    return solve_motion(project.corner, np.linspace(-project.rebound, project.bump, 23))


def scene_of(stage: Any, project: Project, overlays: str = "all", colours: Theme = LIGHT) -> Scene:
    chosen = project.registry.overlays.values() if overlays == "all" else ()
    scene = Scene(stage, project.corner, project.solids(), path_of(project), overlays=chosen, theme=colours)
    scene.look(look("corner"), SIZE[0] / SIZE[1])
    return scene


def pixels(stage: Any) -> np.ndarray:  # type: ignore[type-arg]
    return drawn_pixels(stage.render_window).astype(int)


def matrix_of(actor: Any) -> np.ndarray:  # type: ignore[type-arg]
    found = actor.GetUserMatrix()
    return np.array([[found.GetElement(row, column) for column in range(4)] for row in range(4)])


def test_every_actor_stands_where_its_body_is(stage: Any, project: Project) -> None:
    scene = scene_of(stage, project)
    actors = dict(scene.actors)
    for travel, rack in ((0.0, 0.0), (31.0, -12.0), (-22.5, 8.0)):
        pose = solve_motion(project.corner, travel, rack)
        scene.show(pose)
        assert scene.actors == actors, "actors live on; only their matrices change"
        for solid in project.solids():
            assert matrix_of(actors[solid.name]) == pytest.approx(pose.matrix(solid.body), abs=1e-12)
    assert matrix_of(actors["tyre"]) != pytest.approx(np.eye(4), abs=1e-3)


def test_at_design_nothing_is_moved(stage: Any, project: Project) -> None:
    scene = scene_of(stage, project)
    scene.show(solve_motion(project.corner, 0.0))
    for solid in project.solids():
        assert matrix_of(scene.actors[solid.name]) == pytest.approx(np.eye(4), abs=1e-9)


def test_a_pose_out_of_reach_leaves_the_scene_where_it_was(stage: Any, project: Project) -> None:
    scene = scene_of(stage, project)
    scene.show(solve_motion(project.corner, 20.0))
    before = matrix_of(scene.actors["tyre"])
    scene.show(solve_motion(project.corner, 900.0))
    assert np.array_equal(matrix_of(scene.actors["tyre"]), before)


def test_the_spring_stretches_between_its_ends(stage: Any, full_project: Path, registry: Registry) -> None:
    project = load_project(full_project, registry)
    spring = project.corner.spring
    assert spring is not None
    scene = scene_of(stage, project)
    for travel in (-40.0, 0.0, 50.0):
        pose = solve_motion(project.corner, travel)
        scene.show(pose)
        end = pose.point(spring.on, spring.moving)
        coil, tube, rod = (matrix_of(scene.actors[name]) for name in (SPRING, DAMPER, DAMPER_ROD))
        length = float(np.linalg.norm(spring.moving - spring.chassis))
        assert coil @ [0.0, 0.0, 0.0, 1.0] == pytest.approx([*spring.chassis, 1.0])
        assert coil @ [0.0, 0.0, length, 1.0] == pytest.approx([*end, 1.0], abs=1e-9)
        assert rod @ [0.0, 0.0, 0.0, 1.0] == pytest.approx([*end, 1.0], abs=1e-9)
        for rigid in (tube, rod):
            assert rigid[:3, :3] @ rigid[:3, :3].T == pytest.approx(np.eye(3), abs=1e-12)
        across = np.linalg.norm(coil[:3, :2], axis=0)
        assert across == pytest.approx([1.0, 1.0]), "the coil keeps its width"


@pytest.mark.parametrize("dark", [False, True])
def test_the_picture_is_neither_empty_nor_black(stage: Any, project: Project, dark: bool) -> None:
    colours = theme(dark)
    scene = scene_of(stage, project, colours=colours)
    scene.show(solve_motion(project.corner, 10.0))
    seen = pixels(stage)
    background = np.array(colours.bytes_rgb("background"))
    assert np.abs(seen[3, 3] - background).max() <= 2
    share = float((np.abs(seen - background).max(axis=2) > 24).mean())
    assert 0.05 < share < 0.7
    for token in ("force-line", "steering-axis", "instant-axis"):
        near = np.abs(seen - np.array(colours.bytes_rgb(token))).max(axis=2) < 60
        assert near.sum() > 10, token


def test_the_tyre_is_see_through_only_while_something_is_drawn_over_it(stage: Any, project: Project) -> None:
    scene = scene_of(stage, project)
    tyre = scene.actors["tyre"].GetProperty()
    assert tyre.GetOpacity() == SEE_THROUGH["tyre"]
    # one looks through two walls
    assert (1.0 - SEE_THROUGH["tyre"]) ** 2 == pytest.approx(0.55, abs=0.01)
    scene.overlays = ()
    assert tyre.GetOpacity() == 1.0
    scene.show(solve_motion(project.corner, 0.0))
    assert not scene.labels
    assert not any(actor.GetVisibility() for actor in (*scene.glyph_actors, *scene.outline_actors))


def test_the_camera_stays_while_the_wheel_moves(stage: Any, project: Project) -> None:
    scene = scene_of(stage, project)
    view = scene.renderer.GetActiveCamera()
    places = set()
    for travel in (-50.0, 0.0, 50.0):
        scene.show(solve_motion(project.corner, travel))
        places.add((*view.GetPosition(), *view.GetFocalPoint(), view.GetViewAngle()))
    assert len(places) == 1
    assert next(iter(places))[-1] == pytest.approx(20.0)


def test_the_camera_sees_what_its_own_geometry_says(stage: Any, project: Project) -> None:
    """A label's place comes from our projection, the picture from VTK's: the two agree."""
    scene = scene_of(stage, project)
    scene.show(solve_motion(project.corner, 0.0))
    for name in ("corner", "front", "side", "top", "70,40"):
        camera = scene.look(look(name), SIZE[0] / SIZE[1])
        for place in ([0.0, 650.0, 230.0], [120.0, 300.0, 400.0], [-150.0, 500.0, 20.0]):
            scene.renderer.SetWorldPoint(*place, 1.0)
            scene.renderer.WorldToDisplay()
            x, y, _ = scene.renderer.GetDisplayPoint()
            ours = camera.project(np.array(place), float(SIZE[0]), float(SIZE[1]))[:2]
            assert ours == pytest.approx([x, SIZE[1] - y], abs=0.05), name


def test_back_faces_are_culled_only_where_a_mesh_is_closed(stage: Any, project: Project) -> None:
    closed = merged([cylinder([0, 0, 0], [0, 0, 50], 10.0), ball([80.0, 0, 0], 12.0)])
    assert watertight(*closed)
    assert not watertight(closed[0], closed[1][:-1]), "a hole"
    assert not watertight(closed[0], closed[1][:, ::-1]), "inside out"
    turned = closed[1].copy()
    turned[0] = turned[0][::-1]
    assert not watertight(closed[0], turned), "one triangle the other way round"
    corner = project.corner
    vertices = closed[0] + corner.wheel.centre
    solids = (
        Solid("closed", "wheel", vertices, closed[1]),
        Solid("open", "wheel", vertices, closed[1][:-1]),
    )
    scene = Scene(stage, corner, solids, path_of(project), theme=LIGHT)
    assert scene.actors["closed"].GetProperty().GetBackfaceCulling()
    assert not scene.actors["open"].GetProperty().GetBackfaceCulling()


def test_large_scenes_are_thinned_for_display_and_small_ones_are_not(project: Project) -> None:
    corner = project.corner
    fine = tyre_ring(corner.wheel.centre, corner.wheel.spin_axis, 270.0, 200.0, 165.0, segments=900)
    small = ball(corner.wheel.centre, 20.0)
    solids = (Solid("tyre", "wheel", *fine, role="tyre"), Solid("ball", "wheel", *small))
    meshes = display_meshes(solids, 10_000)
    assert sum(len(faces) for _, faces in meshes) < 12_000
    assert meshes[1][1] is small[1]
    kept = meshes[0][0]
    assert np.ptp(kept, axis=0) == pytest.approx(np.ptp(fine[0], axis=0), rel=0.02)
    untouched = display_meshes(solids, 10**6)
    assert untouched[0][1] is fine[1]


def test_an_overlay_that_fails_is_named_and_the_rest_is_drawn(stage: Any, project: Project) -> None:
    def broken(state: State) -> list[Glyph]:
        raise ZeroDivisionError("no axle in the car park")

    good = project.registry.overlays["force-lines"]
    scene = Scene(
        stage,
        project.corner,
        project.solids(),
        path_of(project),
        overlays=(Overlay("broken", "Broken", broken), good),
        theme=LIGHT,
    )
    scene.show(solve_motion(project.corner, 0.0))
    assert scene.faults == {"broken": "ZeroDivisionError: no axle in the car park"}
    assert any(isinstance(glyph, Line) for glyph in scene.glyphs)


def test_a_scene_needs_no_project_file(stage: Any, project: Project) -> None:
    corner: Corner = project.corner
    scene = Scene(stage, corner, generated_solids(corner, RodStyle()), path_of(project), theme=LIGHT)
    scene.look(look("side"), SIZE[0] / SIZE[1])
    scene.show(solve_motion(corner, 0.0))
    assert np.ptp(pixels(stage)) > 100


def test_dashes_lie_on_the_line_and_leave_gaps() -> None:
    line = np.array([[0.0, 0.0, 0.0], [60.0, 0.0, 0.0], [60.0, 45.0, 0.0]])
    pieces = [piece for sheaf in dashes(line, (10.0, 5.0)) for piece in sheaf]
    lengths = [float(np.linalg.norm(np.diff(piece, axis=0), axis=1).sum()) for piece in pieces]
    assert lengths == pytest.approx([10.0] * 7)
    for piece in pieces:
        assert (np.isclose(piece[:, 1], 0.0) | np.isclose(piece[:, 0], 60.0)).all()
    straight = dashes(line[:2], (10.0, 5.0))
    assert straight[0].shape == (4, 2, 3)


@pytest.mark.parametrize("hand", [1.0, -1.0])
def test_the_screw_shows_the_hand_of_the_pitch(hand: float) -> None:
    """Going along the axis, a right-handed thread turns counter-clockwise as seen from its head."""
    along = np.array([0.6, -0.64, 0.48])
    centres = screw_thread(np.zeros(3), along, hand, 1000.0).reshape(-1, 3)
    height = centres @ along
    across = np.array([0.8, 0.48, -0.36]), np.cross(along, [0.8, 0.48, -0.36])
    order = np.argsort(height)
    angle = np.unwrap(np.arctan2(centres @ across[1], centres @ across[0])[order], period=2.0 * np.pi)
    slope = np.polyfit(height[order], angle, 1)[0]
    assert np.sign(slope) == hand


def test_shapes_of_every_glyph_are_where_the_glyph_is() -> None:
    up, at = np.array([0.0, 0.0, 1.0]), np.array([10.0, 20.0, 30.0])
    made = shapes(
        [
            Ring(at, up, 7.0, "ink", 1.0),
            Disc(at, up, 5.0, "ink"),
            Arrow(at, 100.0 * up, "tension"),
            Axis(at, up, "instant-axis", 300.0, pitch_mm_per_rad=20.0),
        ],
        500.0,
    )
    ring = made.strokes["ink", 1.0][0][0]
    assert np.linalg.norm(ring - at, axis=1) == pytest.approx(7.0)
    assert np.linalg.norm(made.solids["ink"][0] - at, axis=-1).max() == pytest.approx(5.0)
    assert np.concatenate(made.solids["tension"]).reshape(-1, 3)[:, 2].max() == pytest.approx(130.0)
    axis = np.concatenate([sheaf.reshape(-1, 3) for sheaf in made.strokes["instant-axis", 2.5]])
    assert np.linalg.norm(np.cross(axis - at, up), axis=1).max() < 1e-9
    assert np.abs(axis[:, 2] - 30.0).max() <= 300.0


def test_outlines_know_the_two_sides_of_each_edge() -> None:
    _, faces = ball([0.0, 0.0, 0.0], 10.0)
    edges, beside = shared_edges(faces)
    assert len(edges) == 3 * len(faces) // 2
    for edge, pair in zip(edges[::17], beside[::17], strict=True):
        assert set(edge) <= set(faces[pair[0]])
        assert set(edge) <= set(faces[pair[1]])
        assert pair[0] != pair[1]
    assert len(shared_edges(faces[:-1])[0]) == len(edges) - 3
