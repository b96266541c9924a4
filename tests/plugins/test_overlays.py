"""Overlays are data: what they draw stands where mechanics says it does."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from knucklepath.kinematics.corner import contact_point, front_instant_centre, side_instant_centre, steering_axis
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.overlays.glyphs import (
    FAR_MM,
    Arrow,
    Axis,
    Glyph,
    Grid,
    Label,
    Line,
    Point,
    Ring,
    State,
    Ticks,
    length_text,
    minus,
)
from knucklepath.plugins.registry import Registry

SIZE = 600.0
IDS = {
    "wheel-path",
    "instant-axis",
    "front-centre",
    "side-centre",
    "swing-arms",
    "force-lines",
    "roll-centre",
    "steering-axis",
    "contact-patch",
    "ground",
    "labels",
}


def corner_of(layout: Layout) -> Corner:
    centre = np.array(layout.example["wheel.centre"])
    wheel = Wheel(centre, centre[2] - 4.0, camber_deg=-1.2, toe_deg=0.1)
    mechanism = layout.mechanism(layout.example, steered=layout.steers)
    return Corner(mechanism, wheel, layout.carrier, layout.steering_axis)


def state_of(corner: Corner, travel: float = 17.0, rack: float = 0.0) -> State:
    path = solve_motion(corner, np.arange(-50.0, 61.0, 2.0), rack)
    return State(path, solve_motion(corner, travel, rack), SIZE)


def drawn(registry: Registry, name: str, state: State) -> list[Glyph]:
    return list(registry.overlays[name].draw(state))


def only(kind: type, glyphs: list[Glyph]) -> list:  # type: ignore[type-arg]
    return [glyph for glyph in glyphs if isinstance(glyph, kind)]


def parallel_arms() -> Corner:
    """Two equal, level, parallel arms with fore-aft axes and a parallel tie rod: the wheel only moves up and down."""
    from knucklepath.plugins.layouts.double_a_arm import LAYOUT

    points = {
        "upper_arm.front_pivot": (120.0, 300.0, 400.0),
        "upper_arm.rear_pivot": (-120.0, 300.0, 400.0),
        "upper_arm.ball_joint": (0.0, 600.0, 400.0),
        "lower_arm.front_pivot": (120.0, 300.0, 200.0),
        "lower_arm.rear_pivot": (-120.0, 300.0, 200.0),
        "lower_arm.ball_joint": (0.0, 600.0, 200.0),
        "tie_rod.inboard": (100.0, 300.0, 250.0),
        "tie_rod.outboard": (100.0, 600.0, 250.0),
        "wheel.centre": (0.0, 650.0, 300.0),
    }
    return Corner(LAYOUT.mechanism(points), Wheel(np.array(points["wheel.centre"]), 300.0), "knuckle")


def test_the_built_in_overlays_are_all_there_and_come_through_the_hook(registry: Registry) -> None:
    assert set(registry.overlays) >= IDS
    assert {registry.origin[name] for name in IDS} == {"knucklepath"}


@pytest.mark.parametrize("travel", [-50.0, 0.0, 60.0])
def test_every_overlay_draws_finite_glyphs_for_every_layout(layout: Layout, registry: Registry, travel: float) -> None:
    state = state_of(corner_of(layout), travel)
    for overlay in registry.overlays.values():
        glyphs = overlay.draw(state)
        if overlay.id == "steering-axis" and not layout.steers:
            assert not glyphs, "an axle that does not steer has no steering axis"
        elif overlay.id != "roll-centre":
            assert glyphs, overlay.id
        for glyph in glyphs:
            for name, value in vars(glyph).items():
                if isinstance(value, np.ndarray):
                    assert np.isfinite(value).all(), (overlay.id, type(glyph).__name__, name)


def test_a_pose_that_is_not_reached_draws_nothing_of_the_wheel(registry: Registry) -> None:
    corner = corner_of(registry.layouts["double-a-arm"])
    sound = state_of(corner)
    lost = replace(sound, pose=solve_motion(corner, 900.0))
    assert not bool(lost.pose.reached)
    for name in IDS - {"wheel-path"}:
        assert not drawn(registry, name, lost), name
    assert not only(Point, drawn(registry, "wheel-path", lost))


def test_the_knuckle_slides_along_its_instant_axis_by_the_pitch(layout: Layout, registry: Registry) -> None:
    state = state_of(corner_of(layout))
    axes = only(Axis, drawn(registry, "instant-axis", state))
    if not axes:
        screw = state.pose.screw()
        assert np.linalg.norm(screw.point - state.wheel_centre) > FAR_MM
        return
    axis = axes[0]
    pose = state.pose
    for along in (-0.7, 0.0, 1.0):
        place = axis.point + along * axis.half_length_mm * axis.direction
        design = np.linalg.solve(pose.rotation("wheel"), place - pose.translation("wheel"))
        velocity = pose.velocity("wheel", design)
        assert np.linalg.norm(np.cross(velocity, axis.direction)) < 1e-9
        rate = np.linalg.norm(pose.twist("wheel")[:3])
        pitch = 0.0 if np.isnan(axis.pitch_mm_per_rad) else axis.pitch_mm_per_rad
        assert velocity @ axis.direction == pytest.approx(pitch * rate, abs=1e-9)


@pytest.mark.parametrize(("axis", "centre_of"), [(0, front_instant_centre), (1, side_instant_centre)])
def test_force_lines_run_from_the_contact_point_to_the_instant_centre(
    layout: Layout, registry: Registry, axis: int, centre_of: object
) -> None:
    state = state_of(corner_of(layout))
    facing = np.eye(3)[axis]
    centre = centre_of(state.pose)  # type: ignore[operator]
    contact = contact_point(state.pose)
    glyphs = [glyph for glyph in drawn(registry, "force-lines", state) if np.array_equal(glyph.facing, facing)]
    in_plane = np.delete(np.arange(3), axis)
    lines, arrows = only(Line, glyphs), only(Arrow, glyphs)
    if np.linalg.norm((centre - contact)[in_plane]) <= FAR_MM:
        assert not arrows
        assert np.allclose(lines[0].points[0], contact)
        assert np.allclose(lines[0].points[1][in_plane], centre[in_plane])
        assert np.allclose(only(Ring, glyphs)[0].centre[in_plane], centre[in_plane])
    else:
        assert not lines
        assert np.allclose(arrows[0].start, contact)
        towards = (centre - contact)[in_plane]
        drawn_along = arrows[0].vector[in_plane]
        turned = towards[0] * drawn_along[1] - towards[1] * drawn_along[0]
        assert abs(turned) < 1e-6 * np.linalg.norm(towards) * np.linalg.norm(drawn_along)
        assert towards @ drawn_along > 0.0
        assert np.linalg.norm(arrows[0].vector) < SIZE


def test_a_force_along_the_force_line_asks_nothing_of_the_spring(registry: Registry) -> None:
    state = state_of(corner_of(registry.layouts["double-a-arm"]))
    line = next(
        glyph for glyph in drawn(registry, "force-lines", state) if isinstance(glyph, Line) and glyph.facing[0] == 1.0
    )
    pose = state.pose
    # the instant centre belongs to the plane through the wheel centre
    place = np.array([state.wheel_centre[0], *contact_point(pose)[1:]])
    design = np.linalg.solve(pose.rotation("wheel"), place - pose.translation("wheel"))
    velocity = pose.velocity("wheel", design)
    assert abs(velocity[1:] @ (line.points[1] - line.points[0])[1:]) < 1e-9


def test_an_instant_centre_at_infinity_is_an_arrow_across_the_motion(registry: Registry) -> None:
    state = state_of(parallel_arms(), travel=0.0)
    glyphs = drawn(registry, "force-lines", state)
    arrow = next(glyph for glyph in only(Arrow, glyphs) if glyph.facing[0] == 1.0)
    assert abs(arrow.vector[2]) < 1e-9 * SIZE
    assert any("at infinity" in label.text for label in only(Label, glyphs))
    assert not only(Axis, drawn(registry, "instant-axis", state)), "a wheel that only shifts has no instant axis"


def test_the_wheel_path_passes_through_the_design_centre_with_a_tick_each_ten_millimetres(
    layout: Layout, registry: Registry
) -> None:
    corner = corner_of(layout)
    state = state_of(corner, travel=0.0)
    glyphs = drawn(registry, "wheel-path", state)
    line, ticks, now = only(Line, glyphs)[0], only(Ticks, glyphs)[0], only(Point, glyphs)[0]
    assert np.abs(line.points - corner.wheel.centre).sum(axis=1).min() < 1e-9
    assert np.allclose(now.at, corner.wheel.centre)
    heights = ticks.points[:, 2] - corner.wheel.centre[2]
    assert np.allclose(heights, np.arange(-50.0, 61.0, 10.0), atol=1e-9)
    long = ticks.half_lengths_mm > ticks.half_lengths_mm.min()
    assert heights[long] == pytest.approx([-50.0, 0.0, 50.0], abs=1e-9)


def test_the_roll_centre_lies_on_the_force_line_in_the_middle_plane(registry: Registry) -> None:
    state = state_of(corner_of(registry.layouts["double-a-arm"]))
    ring = only(Ring, drawn(registry, "roll-centre", state))[0]
    contact, centre = contact_point(state.pose), front_instant_centre(state.pose)
    assert ring.centre[1] == 0.0
    a, b = (centre - contact)[1:], (ring.centre - contact)[1:]
    assert abs(a[0] * b[1] - a[1] * b[0]) < 1e-6 * np.linalg.norm(a) * np.linalg.norm(b)


def test_the_steering_axis_has_its_foot_on_the_ground(registry: Registry) -> None:
    for name in ("double-a-arm", "strut", "five-link"):
        state = state_of(corner_of(registry.layouts[name]), rack=8.0)
        glyphs = drawn(registry, "steering-axis", state)
        foot = only(Ring, glyphs)[0].centre
        point, along = steering_axis(state.pose)
        assert foot[2] == pytest.approx(state.ground_z)
        assert np.linalg.norm(np.cross(foot - point, along)) < 1e-9 * SIZE
        assert only(Label, glyphs)[0].text.startswith("steering" if name != "five-link" else "virtual")


def test_the_ground_follows_the_wheel(registry: Registry) -> None:
    corner = corner_of(registry.layouts["strut"])
    for travel in (-40.0, 0.0, 40.0):
        state = state_of(corner, travel)
        grid = only(Grid, drawn(registry, "ground", state))[0]
        assert grid.centre[2] == pytest.approx(contact_point(state.pose)[2])
        assert grid.spacing_mm == 100.0


def test_labels_name_every_rod_and_arm(layout: Layout, registry: Registry) -> None:
    corner = corner_of(layout)
    texts = {label.text.replace(" ", "_") for label in only(Label, drawn(registry, "labels", state_of(corner)))}
    assert texts >= {rod.name for rod in corner.mechanism.rods}
    assert texts >= {table for table in layout.points if table.endswith("arm")}


def test_lengths_are_said_in_words_with_units() -> None:
    assert length_text(470.2) == "470\N{THIN SPACE}mm"
    assert length_text(-1825.4) == "−1825\N{THIN SPACE}mm"
    assert length_text(272_800.0) == "272.8\N{THIN SPACE}m"
    assert length_text(float("inf")) == "infinitely far"
    assert minus("-0.0") == "0.0"
    assert minus("-0.1") == "−0.1"


def test_far_centres_say_how_far_they_are(registry: Registry) -> None:
    state = state_of(corner_of(registry.layouts["strut"]), travel=0.0)
    texts = [label.text for label in only(Label, drawn(registry, "side-centre", state))]
    assert texts == ["side-view instant centre, 10.8\N{THIN SPACE}m behind"]
    assert only(Arrow, drawn(registry, "side-centre", state))
