"""Mesh files as trimesh and other programs write them, and as they should not be."""

from __future__ import annotations

import io
import json
import struct
import subprocess
import sys
import zipfile
from pathlib import Path

import numpy as np
import pytest
import trimesh

from knucklepath.kinematics.errors import MeshError
from knucklepath.viewer.mesh_files import MOST_TRIANGLES
from knucklepath.viewer.meshes import load_mesh

FORMATS = ("stl", "obj", "ply", "glb", "3mf")


@pytest.fixture
def box() -> trimesh.Trimesh:
    """A closed box of 8 corners and 12 triangles, 100 × 50 × 20."""
    made = trimesh.creation.box((100.0, 50.0, 20.0))
    made.apply_translation((10.0, 500.0, 200.0))
    return made


def refused(path: Path) -> MeshError:
    """The error of a mesh that must not load."""
    with pytest.raises(MeshError) as caught:
        load_mesh(path)
    assert path.name in str(caught.value)
    assert len(str(caught.value).splitlines()) == 1
    return caught.value


@pytest.mark.parametrize("suffix", [*FORMATS, "STL"])
def test_every_format_gives_the_same_closed_box(suffix: str, box: trimesh.Trimesh, tmp_path: Path) -> None:
    path = tmp_path / f"box.{suffix}"
    box.export(path, file_type=suffix.lower())
    mesh = load_mesh(path)
    assert mesh.vertices.shape == (8, 3)
    assert mesh.faces.shape == (12, 3)
    assert mesh.dropped_triangles == 0
    again = trimesh.Trimesh(mesh.vertices, mesh.faces, process=False)
    assert again.is_watertight
    assert again.volume == pytest.approx(100_000.0)
    np.testing.assert_allclose(again.bounds, box.bounds)


def test_ascii_stl_is_read_and_its_vertices_merged(box: trimesh.Trimesh, tmp_path: Path) -> None:
    path = tmp_path / "box.stl"
    box.export(path, file_type="stl_ascii")
    assert path.read_bytes().startswith(b"solid")
    assert load_mesh(path).vertices.shape == (8, 3)


def test_a_binary_stl_whose_header_begins_with_solid_is_binary(box: trimesh.Trimesh, tmp_path: Path) -> None:
    path = tmp_path / "box.stl"
    content = box.export(file_type="stl")
    path.write_bytes(b"solid made by a program".ljust(80) + content[80:])
    assert load_mesh(path).faces.shape == (12, 3)


@pytest.mark.parametrize("suffix", ["glb", "3mf"])
def test_objects_of_one_file_become_one_mesh_each_in_its_place(
    suffix: str, box: trimesh.Trimesh, tmp_path: Path
) -> None:
    scene = trimesh.Scene()
    scene.add_geometry(box)
    scene.add_geometry(box.copy(), transform=trimesh.transformations.translation_matrix((0.0, 0.0, 300.0)))
    path = tmp_path / f"two.{suffix}"
    scene.export(path)
    mesh = load_mesh(path)
    assert mesh.faces.shape == (24, 3)
    np.testing.assert_allclose(np.ptp(mesh.vertices, axis=0), [100.0, 50.0, 320.0])


@pytest.mark.parametrize(("name", "mm"), [("millimeter", 1.0), ("inch", 25.4), ("meter", 1000.0), ("micron", 0.001)])
def test_a_3mf_file_states_its_own_unit(name: str, mm: float, box: trimesh.Trimesh, tmp_path: Path) -> None:
    # unit names: 3MF core specification, attribute "unit" of the element "model"
    path = tmp_path / "box.3mf"
    with zipfile.ZipFile(io.BytesIO(box.export(file_type="3mf"))) as old, zipfile.ZipFile(path, "w") as new:
        for item in old.infolist():
            content = old.read(item)
            if item.filename.endswith(".model"):
                assert b'unit="millimeter"' in content
                content = content.replace(b'unit="millimeter"', f'unit="{name}"'.encode())
            new.writestr(item, content)
    assert load_mesh(path).mm_per_unit == mm


def test_quads_become_triangles(tmp_path: Path) -> None:
    path = tmp_path / "quad.obj"
    path.write_text("v 0 0 0\nv 1 0 0\nv 1 1 0\nv 0 1 0\nf 1 2 3 4\n")
    assert load_mesh(path).faces.shape == (2, 3)


def test_an_obj_does_not_reach_for_its_material_file(tmp_path: Path) -> None:
    secret = tmp_path / "secret.mtl"
    secret.write_text("newmtl a\nmap_Kd /etc/hostname\n")
    folder = tmp_path / "project"
    folder.mkdir()
    path = folder / "tri.obj"
    path.write_text("mtllib ../secret.mtl\nusemtl a\nv 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n")
    assert load_mesh(path).faces.shape == (1, 3)


def test_triangles_without_area_are_dropped_and_counted_whatever_the_unit(tmp_path: Path) -> None:
    box = trimesh.creation.box()
    for scale in (1e-6, 1.0, 1e6):
        vertices = np.concatenate((box.vertices, [[0.5, 0.5, 0.0], [0.5, 0.5, 0.2]])) * scale
        # an edge taken as a triangle, a point, and three corners on one line
        flat = [[0, 0, 1], [2, 2, 2], [8, 9, 6 if np.allclose(box.vertices[6][:2], 0.5) else 7]]
        path = tmp_path / "box.ply"
        trimesh.Trimesh(vertices, [*box.faces, *flat], process=False).export(path)
        mesh = load_mesh(path)
        assert mesh.dropped_triangles == 3
        assert mesh.faces.shape == (12, 3)
        # what only dropped triangles used is gone
        assert mesh.vertices.shape == (8, 3)


def stl_header(count: int) -> bytes:
    return b"binary".ljust(80) + struct.pack("<I", count)


def test_a_binary_stl_with_too_many_triangles_is_refused_from_its_header(tmp_path: Path) -> None:
    path = tmp_path / "huge.stl"
    count = MOST_TRIANGLES + 1
    with path.open("wb") as file:
        file.write(stl_header(count))
        # a file with holes: its size is right, its content was never written
        file.truncate(84 + 50 * count)
    error = refused(path)
    assert error.count == count
    assert "5,000,001 triangles" in str(error)
    assert "decimate" in str(error)


def test_too_many_faces_are_counted_before_a_text_format_is_parsed(tmp_path: Path) -> None:
    path = tmp_path / "huge.ply"
    path.write_text("ply\nformat ascii 1.0\nelement vertex 3\nelement face 6000000\nend_header\n")
    assert refused(path).count == 6_000_000
    path = tmp_path / "huge.obj"
    path.write_bytes(b"v 0 0 0\nv 1 0 0\nv 0 1 0\n" + b"f 1 2 3\n" * (MOST_TRIANGLES + 1))
    assert refused(path).count == MOST_TRIANGLES + 1


def glb(scene: dict[str, object]) -> bytes:
    text = json.dumps(scene).encode()
    text += b" " * (-len(text) % 4)
    return b"glTF" + struct.pack("<IIII", 2, 20 + len(text), len(text), 0x4E4F534A) + text


def test_a_glb_is_judged_from_its_description(tmp_path: Path) -> None:
    path = tmp_path / "huge.glb"
    primitive = {"attributes": {"POSITION": 0}, "indices": 1}
    accessors = [{"count": 9}, {"count": 3 * 5_000_001}]
    path.write_bytes(glb({"accessors": accessors, "meshes": [{"primitives": [primitive]}]}))
    assert refused(path).count == 5_000_001
    accessors[1]["count"] = 3
    away = {"accessors": accessors, "meshes": [{"primitives": [primitive]}], "buffers": [{"uri": "../x.bin"}]}
    path.write_bytes(glb(away))
    assert "other files" in str(refused(path))
    path.write_bytes(glb({"meshes": 3}))
    assert "damaged" in str(refused(path))


BROKEN = {
    "html.stl": (b"\n<!doctype HTML>\n<html>", "web page"),
    "html.obj": (b"<html><body>", "web page"),
    "empty.stl": (b"", "is empty"),
    "empty.glb": (b"", "is empty"),
    "short.stl": (stl_header(3) + b"\0" * 50, "announces 3 triangles and holds 1"),
    "long.stl": (stl_header(3) + b"\0" * 500, "damaged"),
    "none.stl": (stl_header(0), "no triangles"),
    "ascii_none.stl": (b"solid a\nendsolid a\n", "no triangles"),
    "ascii_short.stl": (b"solid a\n facet normal 0 0 1\n  outer loop\n   vertex 0 0", "cut short"),
    "ascii_words.stl": (
        b"solid a\nfacet normal 0 0 1\nouter loop\nvertex a b c\nvertex 1 0 0\nvertex 0 1 0\n"
        b"endloop\nendfacet\nendsolid",
        "cannot be read",
    ),
    "no_faces.obj": (b"v 0 0 0\nv 1 0 0\n", "no faces"),
    "binary.obj": (b"v 0\0\0\0", "binary"),
    "bad_index.obj": (b"v 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 9\n", "bad_index.obj"),
    "no.ply": (b"plx\n", "does not begin with 'ply'"),
    "cloud.ply": (b"ply\nformat ascii 1.0\nelement vertex 1\nproperty float x\nend_header\n0\n", "no faces"),
    "short.ply": (
        b"ply\nformat binary_little_endian 1.0\nelement vertex 3\nproperty float x\nproperty float y\n"
        b"property float z\nelement face 1\nproperty list uchar int vertex_indices\nend_header\n\0\0",
        "short.ply",
    ),
    "no.glb": (b"glTX" + b"\0" * 40, "does not begin with 'glTF'"),
    "short.glb": (b"glTF" + struct.pack("<IIII", 2, 900, 800, 0x4E4F534A), "cut short"),
    "no.3mf": (b"PX", "not a ZIP archive"),
    "short.3mf": (b"PK\x03\x04" + b"\0" * 30, "damaged"),
    "part.step": (b"ISO-10303-21;", "unknown ending '.step'"),
    "part": (b"solid", "unknown ending ''"),
    "overflow.obj": (b"v 0 0 0\nv 1e999 0 0\nv 0 1 0\nf 1 2 3\n", "not finite"),
    "nan.obj": (b"v 0 0 0\nv nan 0 0\nv 0 1 0\nv 0 0 1\nf 1 2 3\nf 1 3 4\n", "1 of 2 triangles"),
    "flat.obj": (b"v 0 0 0\nv 1 0 0\nv 2 0 0\nf 1 2 3\n", "without area"),
}


@pytest.mark.parametrize("name", BROKEN)
def test_a_broken_mesh_is_refused_in_one_line(name: str, tmp_path: Path) -> None:
    content, hint = BROKEN[name]
    path = tmp_path / name
    path.write_bytes(content)
    assert hint in str(refused(path))


@pytest.mark.parametrize("suffix", FORMATS)
def test_a_file_cut_anywhere_is_refused_or_still_sound(suffix: str, box: trimesh.Trimesh, tmp_path: Path) -> None:
    whole = box.export(file_type=suffix)
    content = whole.encode() if isinstance(whole, str) else bytes(whole)
    path = tmp_path / f"cut.{suffix}"
    for length in np.linspace(0, len(content) - 1, 25).astype(int):
        path.write_bytes(content[:length])
        try:
            mesh = load_mesh(path)
        except MeshError:
            continue
        # OBJ has no end mark: what is left of it may be a smaller mesh, but never a wrong one
        assert suffix in ("obj", "ply")
        assert np.isfinite(mesh.vertices).all()
        assert len(mesh.faces) <= 12


def test_a_mesh_that_is_not_there_is_refused(tmp_path: Path) -> None:
    assert "No such file" in str(refused(tmp_path / "none.stl"))


def test_trimesh_is_imported_only_for_a_mesh(tmp_path: Path) -> None:
    (tmp_path / "axle.toml").write_text("layout = 3\n")
    code = (
        "import sys\nfrom knucklepath.viewer.project import load_project\n"
        f"try: load_project({str(tmp_path)!r})\nexcept Exception as error: print(type(error).__name__)\n"
        "print('trimesh' in sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["ProjectError", "False"]
