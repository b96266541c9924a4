"""Sound projects: every key read, every length in mm, parts in their place, lines found."""

from __future__ import annotations

import shutil
import tomllib
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from knucklepath.kinematics.clearance.pairs import pairs_to_check
from knucklepath.kinematics.clearance.primitives import cylinder
from knucklepath.kinematics.errors import ProjectError
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.motion import solve_motion
from knucklepath.plugins.registry import Registry
from knucklepath.viewer.exports.stl import binary_stl
from knucklepath.viewer.project import load_project
from knucklepath.viewer.toml_lines import find_lines


def test_every_key_of_the_file_is_read(full_project: Path, registry: Registry) -> None:
    project = load_project(full_project, registry)
    corner = project.corner
    assert project.path == full_project
    assert project.title == "Gravel-hill single-seater, front axle"
    assert project.layout.id == "double-a-arm"
    assert corner.axle == "front"
    assert corner.point("lower_arm.ball_joint").tolist() == [6.0, 610.0, 105.0]
    assert corner.point("wheel.centre").tolist() == [0.0, 640.0, 205.0]
    wheel = corner.wheel
    assert (wheel.camber_deg, wheel.toe_deg, wheel.loaded_radius) == (-1.5, 0.2, 255.0)
    assert (wheel.tyre_radius, wheel.tyre_width, wheel.rim_diameter) == (260.0, 180.0, 330.0)
    assert (project.bump, project.rebound, project.rack_each_way) == (60.0, 50.0, 35.0)
    assert corner.steered
    spring = corner.spring
    assert spring is not None
    assert (spring.on, spring.shortest, spring.longest) == ("lower_arm", 190.0, 420.0)
    assert (spring.rate_n_per_mm, spring.preload_n) == (45.0, 600.0)
    assert spring.moving.tolist() == [-15.0, 520.0, 125.0]
    assert project.rods.of("upper_arm") == 20.0
    assert project.rods.of("tie_rod") == 16.0
    vehicle = corner.vehicle
    assert vehicle is not None
    assert (vehicle.wheelbase, vehicle.centre_of_gravity_height) == (2450.0, 310.0)
    assert (vehicle.front_brake_share, vehicle.front_drive_share) == (0.6, 0.0)
    knuckle, tyre = project.parts
    assert (knuckle.name, knuckle.body, knuckle.colour) == ("knuckle casting", "knuckle", "#7f8c8d")
    assert (tyre.name, tyre.body, tyre.colour) == ("tyre", "wheel", None)
    (rule,) = project.clearances
    assert (rule.a, rule.b, rule.gap) == ("tyre", "lower_arm", 8.0)
    (load,) = project.loads
    assert load.contact_force.tolist() == [0.0, -2600.0, 3100.0]
    assert (load.aligning_moment, load.torque_reaction) == (0.0, "knuckle")


def test_keys_without_a_result_yet_are_listed(full_project: Path, registry: Registry) -> None:
    project = load_project(full_project, registry)
    expected = {"spring.rate_n_per_mm", "spring.preload_n", "loads"}
    assert set(project.unused_keys) == expected


def test_the_least_project_has_the_defaults(full_project: Path, registry: Registry) -> None:
    text = full_project.read_text()
    points = text[text.index("[points") : text.index("[wheel]")]
    full_project.write_text(
        'layout = "double-a-arm"\n'
        + points
        + "[wheel]\ncentre = [0, 640, 205]\nloaded_radius = 255\n[travel]\nbump = 60\nrebound = 50\n"
    )
    project = load_project(full_project, registry)
    assert project.title == "axle"
    assert project.corner.axle == "front"
    assert project.corner.wheel.outer_radius == 255.0
    assert (project.corner.wheel.camber_deg, project.corner.wheel.toe_deg) == (0.0, 0.0)
    # without [rack] the tie rod's inboard end is fixed to the chassis
    assert not project.corner.steered
    assert project.rack_each_way is None
    assert "rack" not in project.corner.mechanism.body_names
    assert project.rods.of("tie_rod") == 20.0
    assert (project.parts, project.clearances, project.loads, project.unused_keys) == ((), (), (), ())
    assert project.corner.spring is None
    assert project.corner.vehicle is None


@pytest.mark.parametrize(("unit", "mm"), [("m", 1000.0), ("in", 25.4)])
def test_the_unit_applies_to_every_length_and_to_nothing_else(
    unit: str, mm: float, full_project: Path, registry: Registry
) -> None:
    in_mm = load_project(full_project, registry)
    lengths = ("bump", "rebound", "each_way", "shortest", "longest", "diameter", "wheelbase", "gap", "loaded_radius")
    lengths += ("tyre_radius", "tyre_width", "rim_diameter", "centre_of_gravity_height", "centre", "chassis", "moving")
    lengths += ("front_pivot", "rear_pivot", "ball_joint", "inboard", "outboard")
    rows = []
    for row in full_project.read_text().splitlines():
        key, _, value = row.partition("=")
        if key.strip() in lengths:
            number = np.array(tomllib.loads(f"v = {value}")["v"]) / mm
            row = f"{key}= {number.tolist()!r}"
        rows.append(row)
    # the first part states its own unit, the second follows the file
    text = "\n".join(rows).replace('units  = "mm"', f'units  = "{unit}"')
    shifted = f"[1,0,0,{10.0 / mm!r}, 0,1,0,0, 0,0,1,0]"
    full_project.write_text(text.replace("[1,0,0,0, 0,1,0,0, 0,0,1,0]", shifted))
    tyre = full_project.parent / "parts" / "tyre.stl"
    content = tyre.read_bytes()
    triangles = np.frombuffer(content[84:], dtype=[("n", "<f4", 3), ("v", "<f4", (3, 3)), ("a", "<u2")]).copy()
    triangles["v"] /= mm
    tyre.write_bytes(content[:84] + triangles.tobytes())
    other = load_project(full_project, registry)
    for name, point in in_mm.corner.mechanism.points.items():
        np.testing.assert_allclose(other.corner.point(name), point, rtol=1e-12)
    assert other.corner.wheel.loaded_radius == pytest.approx(255.0)
    assert other.corner.wheel.camber_deg == -1.5
    assert (other.bump, other.rebound) == (pytest.approx(60.0), pytest.approx(50.0))
    assert other.rack_each_way == pytest.approx(35.0)
    assert other.rods.of("tie_rod") == pytest.approx(16.0)
    assert other.clearances[0].gap == pytest.approx(8.0)
    spring, vehicle = other.corner.spring, other.corner.vehicle
    assert spring is not None
    assert spring.rate_n_per_mm == 45.0
    assert spring.preload_n == 600.0
    assert spring.longest == pytest.approx(420.0)
    np.testing.assert_allclose(spring.chassis, [-20.0, 300.0, 420.0])
    assert vehicle is not None
    assert vehicle.wheelbase == pytest.approx(2450.0)
    assert vehicle.front_brake_share == 0.6
    assert other.loads[0].contact_force.tolist() == [0.0, -2600.0, 3100.0]
    knuckle, tyre_part = other.parts
    np.testing.assert_allclose(knuckle.vertices - in_mm.parts[0].vertices, [[10.0, 0.0, 0.0]] * len(knuckle.vertices))
    np.testing.assert_allclose(np.ptp(tyre_part.vertices, axis=0), np.ptp(in_mm.parts[1].vertices, axis=0), rtol=1e-5)


def test_a_placement_turns_then_shifts_and_a_mirror_image_keeps_its_faces_outward(
    full_project: Path, registry: Registry
) -> None:
    plain = load_project(full_project, registry).parts[0]
    text = full_project.read_text()
    identity = "[1,0,0,0, 0,1,0,0, 0,0,1,0]"
    full_project.write_text(text.replace(identity, "[0,-1,0,600, 1,0,0,600, 0,0,1,7]"))
    turned = load_project(full_project, registry).parts[0]
    x, y, z = plain.vertices.T
    np.testing.assert_allclose(turned.vertices, np.column_stack((600.0 - y, x + 600.0, z + 7.0)))
    full_project.write_text(text.replace(identity, "[-1,0,0,0, 0,1,0,0, 0,0,1,0]"))
    mirrored = load_project(full_project, registry).parts[0]

    def volume(part: object) -> float:
        a, b, c = (part.vertices[part.faces[:, k]] for k in range(3))  # type: ignore[attr-defined]
        return float(np.einsum("ij,ij->", a, np.cross(b, c)) / 6.0)

    assert volume(plain) > 0.0
    assert volume(mirrored) == pytest.approx(volume(plain))


def names(project_file: Path, registry: Registry) -> dict[str, bool]:
    """Solids of a project: name → made by the program."""
    return {solid.name: solid.generated for solid in load_project(project_file, registry).solids()}


def test_a_part_takes_the_place_of_what_is_generated_for_its_body(full_project: Path, registry: Registry) -> None:
    solids = names(full_project, registry)
    # the casting stands for the knuckle, the tyre for the tyre; a mesh on the wheel leaves the rim
    assert solids == {
        "knuckle casting": False,
        "tyre": False,
        "upper_arm": True,
        "lower_arm": True,
        "tie_rod": True,
        "rack": True,
        "rim": True,
    }


def test_a_tyre_by_another_name_still_replaces_the_tyre_but_a_hub_cap_does_not(
    full_project: Path, registry: Registry
) -> None:
    text = full_project.read_text()
    full_project.write_text(text.replace('name  = "tyre"', 'name  = "Front tire, wet"'))
    assert "tyre" not in names(full_project, registry)
    # a clearance that asks for the tyre means that part
    project = load_project(full_project, registry)
    (pair,) = pairs_to_check(project.corner, project.solids(), project.clearances[:1])
    assert pair.a.name == "Front tire, wet"
    full_project.write_text(text.replace('name  = "tyre"', 'name  = "hub cap"'))
    assert names(full_project, registry)["tyre"] is True


def test_rods_that_are_not_shown_are_no_solids(full_project: Path, registry: Registry) -> None:
    text = full_project.read_text()
    full_project.write_text(text.replace("diameter = 16.0", "shown = false\n[rods.rim]\nshown = false"))
    solids = names(full_project, registry)
    assert "tie_rod" not in solids
    assert "rim" not in solids
    assert "upper_arm" in solids


def test_a_part_on_the_chassis_replaces_nothing(full_project: Path, registry: Registry) -> None:
    text = full_project.read_text()
    full_project.write_text(text.replace('on    = "knuckle"', 'on    = "chassis"'))
    solids = names(full_project, registry)
    assert solids["knuckle"] is True
    assert solids["knuckle casting"] is False


def test_knuckle_and_wheel_mean_the_carrier_of_any_layout(
    sound_project: Callable[[str], Path], registry: Registry
) -> None:
    file = sound_project("semi-trailing-arm")
    file.write_text(file.read_text().replace('on     = "arm"', 'on     = "knuckle"'))
    project = load_project(file, registry)
    assert [part.body for part in project.parts] == ["arm", "chassis", "wheel"]


def test_a_folder_that_holds_one_project_is_that_project(full_project: Path, registry: Registry) -> None:
    assert load_project(full_project.parent, registry).path == full_project
    assert load_project(str(full_project.parent), registry).path == full_project


def test_a_link_inside_the_folder_is_followed(full_project: Path, registry: Registry) -> None:
    parts = full_project.parent / "parts"
    shutil.move(parts / "tyre.stl", parts / "round.stl")
    (parts / "tyre.stl").symlink_to("round.stl")
    assert len(load_project(full_project, registry).parts) == 2


def test_windows_line_ends_and_a_byte_order_mark_do_no_harm(full_project: Path, registry: Registry) -> None:
    text = full_project.read_text()
    full_project.write_bytes(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode())
    assert load_project(full_project, registry).title == "Gravel-hill single-seater, front axle"
    full_project.write_bytes(b"\xef\xbb\xbf" + text.replace("bump", "bomp").replace("\n", "\r\n").encode())
    with pytest.raises(ProjectError) as caught:
        load_project(full_project, registry)
    assert caught.value.line == text.splitlines().index("bump = 60.0") + 1


def test_degenerate_triangles_of_a_part_are_dropped_and_counted(full_project: Path, registry: Registry) -> None:
    vertices, faces = cylinder([0.0, 560.0, 205.0], [0.0, 630.0, 205.0], 60.0)
    flat = np.array([[0, 0, 1], [2, 3, 2], [4, 4, 4]], dtype=np.int32)
    mesh = (vertices, np.concatenate((faces, flat)).astype(np.int32))
    (full_project.parent / "parts" / "knuckle.stl").write_bytes(binary_stl(mesh))
    part = load_project(full_project, registry).parts[0]
    assert part.dropped_triangles == 3
    assert len(part.faces) == len(faces)


def test_a_clearance_may_name_a_body_whose_part_has_another_name(full_project: Path, registry: Registry) -> None:
    full_project.write_text(full_project.read_text().replace('["tyre", "lower_arm"]', '["knuckle", "*"]'))
    assert load_project(full_project, registry).clearances[0].a == "knuckle"


def test_every_layout_moves_over_its_starters_limits(
    layout: Layout, sound_project: Callable[[str], Path], registry: Registry
) -> None:
    project = load_project(sound_project(layout.id), registry)
    travel = np.linspace(-project.rebound, project.bump, 5)
    rack = np.linspace(-1.0, 1.0, 3) * (project.rack_each_way or 0.0)
    assert solve_motion(project.corner, travel[:, None], rack[None, :]).reached.all()


TEXT = """\
title = "a # b" # c
x."y z".w = 1
[points.upper]
a = [1,
  2, # k
  [3]]
"q.r" = '''
multi = 3
'''
b = { c = 1, d = [ { e = 2 } ] }

[[parts]]
name = "one"
[[parts]]
name = "two"
[parts.inner]
k = 1979-05-27 07:32:00
"""


def test_the_line_of_every_key_is_found() -> None:
    lines = find_lines(TEXT)
    assert lines.places[("title",)] == 1
    assert lines.places[("x", "y z", "w")] == 2
    assert lines.places[("points", "upper")] == 3
    assert lines.places[("points", "upper", "a", 1)] == 5
    assert lines.places[("points", "upper", "a", 2, 0)] == 6
    assert lines.places[("points", "upper", "q.r")] == 7
    assert lines.places[("points", "upper", "b", "d", 0, "e")] == 10
    assert lines.places[("parts", 1, "name")] == 15
    assert lines.places[("parts", 1, "inner", "k")] == 17
    # what has no place of its own has that of the table around it
    assert lines.of(("parts", 0, "mesh")) == 12
    assert lines.of(("wheel", "centre")) is None
    assert not lines.repeated


def test_every_value_of_a_document_has_a_line(full_project: Path) -> None:
    text = full_project.read_text()
    lines = find_lines(text)

    def walk(value: object, path: tuple[str | int, ...]) -> None:
        steps: list[tuple[str | int, object]] = []
        if isinstance(value, dict):
            steps = list(value.items())
        elif isinstance(value, list):
            steps = list(enumerate(value))
        for step, inner in steps:
            assert (*path, step) in lines.places
            walk(inner, (*path, step))

    walk(tomllib.loads(text), ())


def test_keys_given_twice_are_found_with_both_lines() -> None:
    (first, second) = find_lines("[a]\nx = 1\nx = 2\n[b]\n[a]\n").repeated
    assert (first.path, first.first, first.second) == (("a", "x"), 2, 3)
    assert (second.path, second.first, second.second) == (("a",), 1, 5)
