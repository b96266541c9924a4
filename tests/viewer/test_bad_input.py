"""Broken projects: each gives one message with file, key or line, what is wrong and what would be right."""

from __future__ import annotations

import os
import re
import struct
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from knucklepath.kinematics.errors import KnucklepathError, ProjectError
from knucklepath.plugins.registry import Registry
from knucklepath.viewer.cli import main
from knucklepath.viewer.project import load_project

#: name → (text to replace, what replaces it, key in the message, hint in the message)
EDITS: dict[str, tuple[str, str, str, str]] = {
    # missing
    "layout missing": ('layout = "double-a-arm"\n', "", "layout", "add layout ="),
    "travel missing": ("[travel]\nbump = 60.0\nrebound = 50.0\n", "", "travel", "add [travel] with bump, rebound"),
    "wheel under another name": ("[wheel]", "[wheels]", "wheels", "did you mean 'wheel'"),
    "points of a table missing": (
        "[points.tie_rod]\ninboard  = [95.0, 270.0, 140.0]\noutboard = [80.0, 600.0, 135.0]\n",
        "",
        "points.tie_rod",
        "add [points.tie_rod] with inboard, outboard",
    ),
    "point missing": ("ball_joint  = [6.0, 610.0, 105.0]\n", "", "points.lower_arm.ball_joint", "ball joint at the"),
    "loaded radius missing": ("loaded_radius = 255.0\n", "", "wheel.loaded_radius", "add loaded_radius = 255.0"),
    "bump missing": ("bump = 60.0\n", "", "travel.bump", "is missing"),
    "rack travel missing": ("each_way = 35.0\n", "", "rack.each_way", "is missing"),
    "spring body missing": ('on      = "lower_arm"\n', "", "spring.on", "is missing"),
    "part mesh missing": ('mesh  = "parts/tyre.stl"\n', "", "parts[2].mesh", "is missing"),
    "gap missing": ("gap = 8.0\n", "", "clearances[1].gap", "add gap = 8.0"),
    "load without force": ("contact_force = [0.0, -2600.0, 3100.0]\n", "", "loads[1].contact_force", "is missing"),
    # misspelt
    "top key misspelt": ("axle   =", "axel   =", "axel", "did you mean 'axle'"),
    "layout key misspelt": ("layout =", "layuot =", "layuot", "did you mean 'layout'"),
    "layout id misspelt": ('"double-a-arm"', '"double-a-amr"', "layout", "did you mean 'double-a-arm'"),
    "point table misspelt": ("[points.tie_rod]", "[points.tierod]", "points.tierod", "did you mean 'tie_rod'"),
    "point misspelt": ("inboard  =", "inbord  =", "points.tie_rod.inbord", "did you mean 'inboard'"),
    "point twice by case": ("outboard =", "Outboard =", "points.tie_rod.Outboard", "did you mean 'outboard'"),
    "wheel key misspelt": ("camber_deg", "camber", "wheel.camber", "did you mean 'camber_deg'"),
    "rod misspelt": ("[rods.tie_rod]", "[rods.tie_rot]", "rods.tie_rot", "did you mean 'tie_rod'"),
    "rod key misspelt": ("diameter = 16.0", "diametre = 16.0", "rods.tie_rod.diametre", "did you mean 'diameter'"),
    "part key misspelt": ('colour = "', 'color = "', "parts[1].color", "did you mean 'colour'"),
    "body misspelt": ('on    = "knuckle"', 'on    = "knukle"', "parts[1].on", "did you mean 'knuckle'"),
    "spring body misspelt": ('on      = "lower_arm"', 'on      = "lower_am"', "spring.on", "did you mean 'lower_arm'"),
    "clearance misspelt": (
        '["tyre", "lower_arm"]',
        '["tyre", "lower_arn"]',
        "between",
        "did you mean 'lower_arm'",
    ),
    "torque reaction unknown": ('= "knuckle"\n', '= "gearbox"\n', "on", "there is no body 'gearbox'"),
    "axle unknown": ('"front"\n', '"middle"\n', "axle", "front, rear"),
    "units unknown": ('units  = "mm"', 'units  = "cm"', "units", "mm, m, in"),
    # duplicated
    "key twice": ("bump = 60.0", "bump = 60.0\nbump = 61.0", "travel.bump", "given twice, first on line"),
    "table twice": ("[travel]", "[wheel]", "wheel", "given twice, first on line"),
    "parts as one table": ('[[parts]]\nname  = "tyre"', '[parts]\nname  = "tyre"', "parts", "[[parts]]"),
    "part names twice": ('name  = "tyre"', 'name  = "knuckle casting"', "parts[2].name", "two parts are called"),
    "a pair of one": ('["tyre", "lower_arm"]', '["tyre", "tyre"]', "clearances[1].between", "twice"),
    # wrong type
    "text for a number": ("camber_deg = -1.5", 'camber_deg = "-1.5"', "wheel.camber_deg", "not a number"),
    "true for a number": ("bump = 60.0", "bump = true", "travel.bump", "not a number"),
    "number for text": ('title  = "Gravel-hill single-seater, front axle"', "title = 12", "title", "text in quotes"),
    "date for a number": ("bump = 60.0", "bump = 2024-05-01", "travel.bump", "not a number"),
    "two numbers for a point": ("[6.0, 610.0, 105.0]", "[6.0, 610.0]", "ball_joint", "has 2 numbers, not 3"),
    "text in a point": ("[6.0, 610.0, 105.0]", '[6.0, "610", 105.0]', "ball_joint[2]", "not a number"),
    "point as a number": ("[6.0, 610.0, 105.0]", "6.0", "ball_joint", "3 numbers in brackets"),
    "point as a table": ("[6.0, 610.0, 105.0]", "{x = 6.0, y = 610.0, z = 105.0}", "ball_joint", "is a table"),
    "table as a number": ("[rods.tie_rod]\ndiameter = 16.0", "tie_rod = 16.0", "rods.tie_rod", "write [rods.tie_rod]"),
    "wheel with double brackets": ("[wheel]", "[[wheel]]", "wheel", "single brackets"),
    "names as one text": ('["tyre", "lower_arm"]', '"tyre, lower_arm"', "between", "a list of 2 texts"),
    "three names": ('["tyre", "lower_arm"]', '["tyre", "lower_arm", "*"]', "between", "a list of 2 texts"),
    "placement too short": ("[1,0,0,0, 0,1,0,0, 0,0,1,0]", "[1,0,0, 0,1,0, 0,0,1]", "parts[1].placement", "not 12"),
    "colour by name": ('"#7f8c8d"', '"grey"', "parts[1].colour", "#7f8c8d"),
    "shown as text": ("diameter = 16.0", 'shown = "no"', "rods.tie_rod.shown", "true or false"),
    "title empty": ('"Gravel-hill single-seater, front axle"', '""', "title", "is empty"),
    # nan, infinite, huge, out of range
    "nan in a point": ("[6.0, 610.0, 105.0]", "[6.0, nan, 105.0]", "ball_joint[2]", "finite"),
    "infinite travel": ("bump = 60.0", "bump = inf", "travel.bump", "finite"),
    "infinite by overflow": ("[6.0, 610.0, 105.0]", "[6.0, 1e999, 105.0]", "ball_joint[2]", "finite"),
    "number of 400 digits": ("bump = 60.0", f"bump = {'9' * 400}", "travel.bump", "finite"),
    "number of 5000 digits": ("bump = 60.0", f"bump = {'9' * 5000}", "", "not TOML"),
    "huge coordinate": ("[6.0, 610.0, 105.0]", "[6.0, 6.1e8, 105.0]", "ball_joint[2]", "far too large"),
    "far coordinate": ("[6.0, 610.0, 105.0]", "[6.0, 61000.0, 105.0]", "points.lower_arm.ball_joint", "60.67 m from"),
    "negative rebound": ("rebound = 50.0", "rebound = -50.0", "travel.rebound", "positive"),
    "zero bump": ("bump = 60.0", "bump = 0.0", "travel.bump", "positive"),
    "absurd bump": ("bump = 60.0", "bump = 60000.0", "travel.bump", "is believable"),
    "wheel without radius": ("loaded_radius = 255.0", "loaded_radius = 0.0", "wheel.loaded_radius", "positive"),
    "camber beyond reason": ("camber_deg = -1.5", "camber_deg = 90.0", "wheel.camber_deg", "at most 45"),
    "brake share in percent": ("front_brake_share = 0.6", "front_brake_share = 60.0", "front_brake_share", "at most 1"),
    "negative gap": ("gap = 8.0", "gap = -1.0", "clearances[1].gap", "not be negative"),
    "tyre smaller than loaded": ("tyre_radius = 260.0", "tyre_radius = 240.0", "wheel.tyre_radius", "smaller than"),
    "tyre diameter for radius": ("tyre_radius = 260.0", "tyre_radius = 520.0", "wheel.tyre_radius", "not a diameter"),
    "rim outside the tyre": ("rim_diameter = 330.0", "rim_diameter = 530.0", "wheel.rim_diameter", "fit into the tyre"),
    "right corner": ("centre = [0.0, 640.0, 205.0]", "centre = [0.0, -640.0, 205.0]", "wheel.centre", "left corner"),
    "stroke limits swapped": ("longest  = 420.0", "longest  = 150.0", "spring.longest", "swapped"),
    "rack without direction": ("axis = [0.0, 1.0, 0.0]", "axis = [0.0, 0.0, 0.0]", "rack.axis", "no direction"),
    "rack to the right": ("axis = [0.0, 1.0, 0.0]", "axis = [0.0, -1.0, 0.0]", "rack.axis", "turn all three signs"),
    "placement with scale": ("[1,0,0,0, 0,1,0,0, 0,0,1,0]", "[2,0,0,0, 0,2,0,0, 0,0,2,0]", "placement", "rotation"),
    "placement without turn": ("[1,0,0,0, 0,1,0,0, 0,0,1,0]", "[0,0,0,0, 0,0,0,0, 0,0,0,0]", "placement", "rotation"),
    # geometry
    "arm pivots in one point": (
        "rear_pivot  = [-170.0, 255.0, 120.0]",
        "rear_pivot  = [160.0, 250.0, 115.0]",
        "points.lower_arm",
        "are the same point",
    ),
    "rod without length": (
        "outboard = [80.0, 600.0, 135.0]",
        "outboard = [95.0, 270.0, 140.0]",
        "points.tie_rod",
        "has no length",
    ),
    "collinear arm": (
        "ball_joint  = [-12.0, 560.0, 315.0]",
        "ball_joint  = [-10.0, 327.5, 292.5]",
        "points.upper_arm.ball_joint",
        "lies on the line through",
    ),
    "both ball joints in one point": (
        "ball_joint  = [-12.0, 560.0, 315.0]",
        "ball_joint  = [6.0, 610.0, 105.0]",
        "points.upper_arm.ball_joint",
        "same point as lower_arm.ball_joint",
    ),
    "tie rod on the steering axis": (
        "outboard = [80.0, 600.0, 135.0]",
        "outboard = [-3.0, 585.0, 210.0]",
        "points.tie_rod",
        "as good as singular",
    ),
    "spring without length": (
        "moving  = [-15.0, 520.0, 125.0]",
        "moving  = [-20.0, 300.0, 420.0]",
        "spring.moving",
        "same point as chassis",
    ),
    "spring on the chassis": (
        'on      = "lower_arm"',
        'on      = "chassis"',
        "spring.on",
        "is the chassis",
    ),
    # wrong units
    "millimetres called metres": ('units  = "mm"', 'units  = "m"', "units", 'units = "mm" would fit'),
    "millimetres called inches": ('units  = "mm"', 'units  = "in"', "units", 'units = "mm" would fit'),
    "radius in metres": ("loaded_radius = 255.0", "loaded_radius = 0.255", "wheel.loaded_radius", "write 255"),
    "part said to be in metres": ('units = "mm"\npl', 'units = "m"\npl', "parts[1].mesh", 'units = "mm" would make it'),
    "part said to be in inches": ('units = "mm"\npl', 'units = "in"\npl', "parts[1].mesh", 'units = "mm" would'),
    # not TOML
    "decimal comma": ("bump = 60.0", "bump = 60,0", "", "decimal point: 60.0"),
    "text without quotes": ('axle   = "front"', "axle   = front", "", 'text stands in quotes: "front"'),
    "quotation mark missing": ('axle   = "front"', 'axle   = "front', "", "quotation mark is missing"),
    "bracket missing": ("[travel]", "[travel", "", "not TOML"),
    "list not closed": ("[6.0, 610.0, 105.0]", "[6.0, 610.0, 105.0", "", "not TOML"),
    "brackets without end": ("bump = 60.0", "bump = " + "[" * 20_000, "", "nested too deeply"),
    # paths
    "path with ..": ('"parts/tyre.stl"', '"../tyre.stl"', "parts[2].mesh", "out of the project folder"),
    "path with .. in the middle": ('"parts/tyre.stl"', '"parts/../../tyre.stl"', "parts[2].mesh", "out of the project"),
    "absolute path": ('"parts/tyre.stl"', '"/etc/hostname"', "parts[2].mesh", "not absolute"),
    "drive letter": ('"parts/tyre.stl"', '"C:/parts/tyre.stl"', "parts[2].mesh", "not absolute"),
    "backslashes": ('"parts/tyre.stl"', "'parts\\tyre.stl'", "parts[2].mesh", "parts/tyre.stl"),
    "mesh not there": ('"parts/tyre.stl"', '"parts/tire.stl"', "parts[2].mesh", "did you mean 'parts/tyre.stl'"),
    "folder not there": ('"parts/tyre.stl"', '"part/tyre.stl"', "parts[2].mesh", "nor its folder 'part'"),
    "mesh is a folder": ('"parts/tyre.stl"', '"parts"', "parts[2].mesh", "is not a file"),
    "name with a null": ('"parts/tyre.stl"', '"parts/\\u0000.stl"', "parts[2].mesh", "no file can have"),
}


def message_of(path: Path, registry: Registry, **options: bool) -> str:
    """The one message that a broken project gives."""
    with pytest.raises(KnucklepathError) as caught:
        load_project(path, registry, **options)
    text = str(caught.value)
    assert len(text.splitlines()) == 1
    assert "Traceback" not in text
    assert len(text) < 700
    return text


@pytest.mark.parametrize("case", EDITS)
def test_a_broken_file_is_refused_with_file_key_line_and_remedy(
    case: str, full_project: Path, registry: Registry
) -> None:
    old, new, key, hint = EDITS[case]
    text = full_project.read_text()
    assert text.count(old) >= 1, "the case changes nothing"
    changed = text.replace(old, new, 1)
    full_project.write_text(changed)
    with pytest.raises(ProjectError) as caught:
        load_project(full_project, registry)
    error, message = caught.value, str(caught.value)
    assert len(message.splitlines()) == 1
    assert message.startswith(str(full_project))
    assert hint in message
    assert key in (error.key or "")
    if error.line is None:
        assert error.key in ("layout", "travel")
    else:
        # the line is that of the key, or of the table around it
        line = changed.splitlines()[error.line - 1]
        names = re.findall(r"[A-Za-z_]+", error.key or "")
        assert not names or any(name in line for name in names)
        assert f":{error.line}:" in message


def test_there_are_at_least_sixty_of_them() -> None:
    assert len(EDITS) + len(FILES) + len(MESHES) >= 60


def _write(content: bytes) -> Callable[[Path], Path]:
    def change(file: Path) -> Path:
        file.write_bytes(content)
        return file

    return change


def _second_file(file: Path) -> Path:
    (file.parent / "other.toml").write_text("title = 'x'")
    return file.parent


def _no_file(file: Path) -> Path:
    file.unlink()
    return file.parent


#: name → (what happens to the file, giving the path to open; hint)
FILES: dict[str, tuple[Callable[[Path], Path], str]] = {
    "empty file": (_write(b""), "layout: is missing"),
    "binary garbage": (_write(bytes(range(256)) * 20), "is not UTF-8 text"),
    "a mesh in its place": (_write(b"solid\0" + b"\0" * 200), "is binary, not text"),
    "UTF-16": (_write("title = 'x'".encode("utf-16")), "save it as UTF-8"),
    "Latin-1": (_write("title = 'Vorderwagen \xfc'\n".encode("latin-1")), ":1: is not UTF-8"),
    "web page": (_write(b"<!DOCTYPE html><html></html>"), ":1: is not TOML"),
    "far too large": (_write(b"# comment\n" * 500_000), "too large for a project file"),
    "two files in the folder": (_second_file, "holds 2 TOML files (axle.toml, other.toml)"),
    "no file in the folder": (_no_file, "holds no project file"),
    "nothing there": (lambda file: file.parent / "axel.toml", "did you mean"),
    "no such folder": (lambda file: file.parent.parent / "gravle", "did you mean"),
    "a null in the path": (lambda file: Path(str(file) + "\0"), "axle.toml"),
}


@pytest.mark.parametrize("case", FILES)
def test_what_is_no_project_file_is_refused(case: str, full_project: Path, registry: Registry) -> None:
    change, hint = FILES[case]
    path = change(full_project)
    message = message_of(path, registry)
    assert hint in message
    assert full_project.parent.name[:4] in message


def _outside(parts: Path) -> None:
    mesh = parts / "tyre.stl"
    away = parts.parent.parent / "away.stl"
    mesh.rename(away)
    mesh.symlink_to(away)


def _folder_outside(parts: Path) -> None:
    away = parts.parent.parent / "away"
    parts.rename(away)
    parts.symlink_to(away)


def _loop(parts: Path) -> None:
    (parts / "tyre.stl").unlink()
    (parts / "tyre.stl").symlink_to("tyre.stl")


def _stl(change: Callable[[bytearray], bytes | bytearray]) -> Callable[[Path], None]:
    def apply(parts: Path) -> None:
        mesh = parts / "tyre.stl"
        mesh.write_bytes(bytes(change(bytearray(mesh.read_bytes()))))

    return apply


def _with_nan(content: bytearray) -> bytearray:
    struct.pack_into("<f", content, 84 + 12, float("nan"))
    return content


def _scaled(factor: float) -> Callable[[bytearray], bytes]:
    import numpy as np

    def change(content: bytearray) -> bytes:
        rows = np.frombuffer(bytes(content[84:]), dtype=[("n", "<f4", 3), ("v", "<f4", (3, 3)), ("a", "<u2")]).copy()
        rows["v"] *= factor
        return bytes(content[:84]) + rows.tobytes()

    return change


#: name → (what happens to parts/tyre.stl, hint)
MESHES: dict[str, tuple[Callable[[Path], None], str]] = {
    "a web page": (_stl(lambda _: b"  <!DOCTYPE html>\n<html><body>404</body></html>"), "web page (HTML)"),
    "a Git LFS pointer": (
        _stl(lambda _: b"version https://git-lfs.github.com/spec/v1\noid sha256:00\n"),
        "git lfs pull",
    ),
    "zero bytes": (_stl(lambda _: b""), "is empty (0 bytes)"),
    "truncated STL": (_stl(lambda content: content[:-700]), "is cut short: it announces"),
    "truncated in its header": (_stl(lambda content: content[:60]), "is cut short"),
    "truncated ASCII STL": (_stl(lambda _: b"solid x\nfacet normal 0 0 1\nouter loop\nvertex 0 0 0\n"), "is cut short"),
    "garbage": (_stl(lambda _: os.urandom(64) + b"\xff" * 500), "no STL at all"),
    "no triangle": (_stl(lambda content: content[:80] + b"\0\0\0\0"), "has no triangles"),
    "six million triangles announced": (
        _stl(lambda content: content[:80] + struct.pack("<I", 6_000_000) + content[84:]),
        "6,000,000 triangles",
    ),
    "a coordinate that is nan": (_stl(_with_nan), "not finite"),
    "only degenerate triangles": (_stl(lambda content: content[:84] + b"\0" * (len(content) - 84)), "without area"),
    "drawn in metres": (_stl(_scaled(1e-3)), 'units = "m" would make it'),
    "drawn in inches": (_stl(_scaled(1 / 25.4)), 'units = "in" would put it at the corner'),
    "a link out of the folder": (_outside, "link that leads out of the project folder"),
    "a folder that leads out": (_folder_outside, "leads out of the project folder"),
    "a link to itself": (_loop, "parts/tyre.stl"),
}


@pytest.mark.parametrize("case", MESHES)
def test_a_broken_mesh_is_refused_with_the_line_that_names_it(
    case: str, full_project: Path, registry: Registry
) -> None:
    change, hint = MESHES[case]
    change(full_project.parent / "parts")
    with pytest.raises(ProjectError) as caught:
        load_project(full_project, registry)
    message = str(caught.value)
    assert len(message.splitlines()) == 1
    assert hint in message
    line = full_project.read_text().splitlines()[(caught.value.line or 0) - 1]
    assert line.startswith("mesh")
    assert caught.value.key in ("parts[1].mesh", "parts[2].mesh")


def test_a_part_far_from_the_corner_is_refused(full_project: Path, registry: Registry) -> None:
    text = full_project.read_text()
    full_project.write_text(text.replace("[1,0,0,0, 0,1,0,0, 0,0,1,0]", "[1,0,0,0, 0,1,0,9000, 0,0,1,0]"))
    assert "m from the wheel centre" in message_of(full_project, registry)


def test_a_rack_on_a_layout_that_does_not_steer_is_refused(
    sound_project: Callable[[str], Path], registry: Registry
) -> None:
    file = sound_project("semi-trailing-arm")
    file.write_text(file.read_text() + "[rack]\neach_way = 30.0\n")
    assert "does not steer; take [rack] out" in message_of(file, registry)


def test_a_part_on_the_rack_of_an_axle_without_one_is_refused(full_project: Path, registry: Registry) -> None:
    text = full_project.read_text().replace("[rack]\neach_way = 35.0\naxis = [0.0, 1.0, 0.0]\n", "")
    full_project.write_text(text.replace('on    = "knuckle"', 'on    = "rack"'))
    assert "without [rack]" in message_of(full_project, registry)


UPRIGHT_AXES = """\
layout = "semi-trailing-arm"
[points.arm]
inner_pivot = [338.0, 500.0, 100.0]
outer_pivot = [338.0, 500.0, 400.0]
[wheel]
centre = [0.0, 705.0, 290.0]
loaded_radius = 290.0
[travel]
bump = 50.0
rebound = 50.0
"""
PARALLEL_LINKS = """\
layout = "five-link"
[points.upper_front]
inboard = [50, 300, 440]
outboard = [50, 650, 440]
[points.upper_rear]
inboard = [-80, 300, 440]
outboard = [-80, 650, 440]
[points.lower_front]
inboard = [60, 300, 200]
outboard = [60, 650, 200]
[points.lower_rear]
inboard = [-90, 300, 200]
outboard = [-90, 650, 200]
[points.toe_link]
inboard = [160, 300, 260]
outboard = [160, 650, 260]
[wheel]
centre = [0, 705, 290]
loaded_radius = 290
[travel]
bump = 50
rebound = 50
"""


@pytest.mark.parametrize(
    ("text", "hint"),
    [
        (UPRIGHT_AXES, "arm turns about the line through arm.inner_pivot and arm.outer_pivot"),
        (UPRIGHT_AXES.replace("338.0, 500.0, 400.0", "338.0, 500.1, 400.0"), "as good as singular"),
        (PARALLEL_LINKS, "keeps 2 freedoms"),
    ],
)
def test_geometry_that_cannot_move_as_declared_is_refused(
    text: str, hint: str, tmp_path: Path, registry: Registry
) -> None:
    file = tmp_path / "axle.toml"
    file.write_text(text)
    message = message_of(file, registry)
    assert hint in message
    assert "axle.toml:" in message


THROUGH_THE_COMMAND_LINE = (
    "layout id misspelt",
    "nan in a point",
    "key twice",
    "collinear arm",
    "millimetres called metres",
    "decimal comma",
    "path with ..",
    "clearance misspelt",
)


@pytest.mark.parametrize("case", THROUGH_THE_COMMAND_LINE)
@pytest.mark.parametrize("command", [["sweep", "--csv"], ["clearance", "--json"]])
def test_a_command_exits_2_with_one_message_and_no_file(
    case: str, command: list[str], full_project: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    old, new, _, hint = EDITS[case]
    full_project.write_text(full_project.read_text().replace(old, new, 1))
    out = tmp_path / "result"
    assert main([command[0], str(full_project), command[1], str(out)]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert len(captured.err.strip().splitlines()) == 1
    assert hint in captured.err
    assert sorted(item.name for item in tmp_path.iterdir()) == ["gravel"]


def test_the_program_itself_exits_2_without_a_traceback(full_project: Path, tmp_path: Path) -> None:
    full_project.write_text("layout = 3\n")
    words = [sys.executable, "-m", "knucklepath.viewer", "sweep", str(full_project), "--csv", "out.csv"]
    done = subprocess.run(words, capture_output=True, text=True, cwd=tmp_path)
    assert done.returncode == 2
    assert done.stdout == ""
    assert "axle.toml:1: layout: is 3, not text in quotes" in done.stderr
    assert "Traceback" not in done.stderr
    assert not (tmp_path / "out.csv").exists()
