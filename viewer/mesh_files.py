"""Mesh files before they are loaded: where they may lie, and what their first bytes say. Imports no mesh library.

What can be refused from a header is refused here, so that no broken or monstrous file reaches a parser.
"""

from __future__ import annotations

import json
import re
import struct
import zipfile
from pathlib import Path, PureWindowsPath

from knucklepath.kinematics.errors import MeshError
from knucklepath.viewer.source import nearest, one_line, printable

#: Formats, by suffix.
SUFFIXES = (".stl", ".obj", ".ply", ".glb", ".3mf")
#: A part of more triangles than this is a whole car's CAD dump.
MOST_TRIANGLES = 5_000_000
#: Bytes of a binary STL: header with count, and each triangle.
STL_HEADER, STL_TRIANGLE = 84, 50
#: Bytes read at a time where a file is searched.
CHUNK = 1 << 22
#: Chunk type "JSON" of GLB, little-endian (glTF 2.0 specification, binary glTF layout).
GLB_JSON = 0x4E4F534A


def inside_folder(folder: Path, name: str) -> Path:
    """The file that a project names, which must lie in the project's folder.

    Raises
    ------
    MeshError : the path is absolute, has "..", leads out through a link, or there is no file.
    """
    called = one_line(name)
    if "\0" in name:
        raise MeshError("no file can have that name", file=called)
    if "\\" in name:
        raise MeshError(f"write the path with forward slashes: {one_line(name.replace(chr(92), '/'))}", file=called)
    if name.startswith(("/", "~")) or PureWindowsPath(name).drive:
        raise MeshError("must be a path inside the project folder, not absolute; copy the file there", file=called)
    if ".." in name.split("/"):
        raise MeshError("leads out of the project folder ('..'); copy the file into it", file=called)
    path = folder / name
    try:
        real = path.resolve()
        if not real.is_relative_to(folder.resolve()):
            raise MeshError("is a link that leads out of the project folder; copy the file itself into it", file=called)
        if real.is_file():
            return path
        if real.exists():
            raise MeshError("is not a file; name a file of the project folder", file=called)
        beside = [item.name for item in path.parent.iterdir()] if path.parent.is_dir() else None
    except (OSError, RuntimeError) as error:
        raise MeshError(f"cannot be read: {getattr(error, 'strerror', None) or error}", file=called) from None
    if beside is None:
        raise MeshError(f"there is no such file, nor its folder '{printable(path.parent.name)}'", file=called)
    near = nearest(path.name, beside)
    hint = f"did you mean '{one_line((Path(name).parent / near).as_posix())}'?" if near else "check the path"
    raise MeshError(f"there is no such file; {hint}", file=called)


def check_mesh_file(path: Path, name: str) -> None:
    """Refuse a file that is no mesh, is cut short, or has too many triangles, from its bytes alone.

    Raises
    ------
    MeshError : with the reason and the remedy.
    """
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        formats = "STL, OBJ, PLY, GLB or 3MF"
        raise MeshError(f"has the unknown ending '{printable(path.suffix)}'; export it as {formats}", file=name)
    size = path.stat().st_size
    if size == 0:
        raise MeshError("is empty (0 bytes); export it again", file=name)
    with path.open("rb") as file:
        head = file.read(4096)
    start = head.lstrip(b"\xef\xbb\xbf \t\r\n")[:64].lower()
    if start.startswith((b"<!doctype html", b"<html", b"<head")):
        raise MeshError("is a web page (HTML), not a mesh; download the file itself", file=name)
    if start.startswith(b"version https://git-lfs"):
        raise MeshError("is a pointer of Git LFS, not the mesh; run 'git lfs pull'", file=name)
    _CHECKS[suffix](path, head, size, name)


def too_many(count: int, name: str) -> MeshError:
    """Build the error for a mesh of more triangles than can be used."""
    return MeshError(
        f"has {count:,} triangles, more than {MOST_TRIANGLES:,}; export it with a coarser tolerance, "
        "or decimate it in a mesh program",
        file=name,
        count=count,
    )


def _check_stl(path: Path, head: bytes, size: int, name: str) -> None:
    """Hold a binary STL's size against its count; an ASCII one must have all that it begins."""
    count = struct.unpack_from("<I", head, 80)[0] if len(head) >= STL_HEADER else None
    if count is not None and size == STL_HEADER + STL_TRIANGLE * count:
        if count > MOST_TRIANGLES:
            raise too_many(count, name)
        if count == 0:
            raise MeshError("has no triangles; export it again", file=name, count=0)
        return
    if head.lstrip()[:5].lower() == b"solid" and (b"\0" not in head or b"facet" in head):
        _check_ascii_stl(path, name)
        return
    if count is None:
        raise MeshError(f"is cut short: {size} bytes hold no STL; export it again", file=name)
    held = (size - STL_HEADER) // STL_TRIANGLE
    if count > MOST_TRIANGLES:
        raise MeshError(
            f"announces {count:,} triangles and holds {held:,}: it is cut short, or no STL at all; export it again, "
            f"with at most {MOST_TRIANGLES:,} triangles",
            file=name,
            count=count,
        )
    if held < count:
        raise MeshError(
            f"is cut short: it announces {count:,} triangles and holds {held:,}; export or copy it again",
            file=name,
            count=count - held,
        )
    raise MeshError(
        f"is damaged or no STL: it announces {count:,} triangles and holds {held:,}; export it again", file=name
    )


def _check_ascii_stl(path: Path, name: str) -> None:
    begun, ended = (
        _occurrences(path, re.compile(rb"\bfacet\b", re.I)),
        _occurrences(path, re.compile(rb"\bendfacet\b", re.I)),
    )
    if begun > MOST_TRIANGLES:
        raise too_many(begun, name)
    if begun == 0:
        raise MeshError("has no triangles; export it again", file=name, count=0)
    if begun != ended or not _occurrences(path, re.compile(rb"\bendsolid\b", re.I)):
        raise MeshError(
            f"is cut short: {begun:,} triangles begin and {ended:,} end; export or copy it again", file=name
        )


def _occurrences(path: Path, pattern: re.Pattern[bytes]) -> int:
    """Count a pattern in a file, a chunk at a time; chunks are cut at line ends."""
    count, rest = 0, b""
    with path.open("rb") as file:
        while chunk := file.read(CHUNK):
            chunk = rest + chunk
            cut = max(chunk.rfind(b"\n") + 1, len(chunk) - CHUNK)
            rest = chunk[cut:]
            count += len(pattern.findall(chunk[:cut]))
    return count + len(pattern.findall(rest))


def _check_obj(path: Path, head: bytes, size: int, name: str) -> None:
    if b"\0" in head:
        raise MeshError("is binary, but OBJ is text; export it again", file=name)
    count = _occurrences(path, re.compile(rb"^[ \t]*f[ \t]", re.M))
    if count > MOST_TRIANGLES:
        raise too_many(count, name)
    if count == 0:
        raise MeshError("has no faces; export it as a surface mesh", file=name, count=0)


def _check_ply(path: Path, head: bytes, size: int, name: str) -> None:
    if not head.startswith(b"ply"):
        raise MeshError("is no PLY file (it does not begin with 'ply'); export it again", file=name)
    found = re.search(rb"^element[ \t]+face[ \t]+(\d{1,18})\b", head, re.M)
    if found is None or int(found[1]) == 0:
        raise MeshError("has no faces; export it as a surface mesh", file=name, count=0)
    if int(found[1]) > MOST_TRIANGLES:
        raise too_many(int(found[1]), name)


def _check_glb(path: Path, head: bytes, size: int, name: str) -> None:
    if not head.startswith(b"glTF") or len(head) < 20:
        raise MeshError("is no GLB file (it does not begin with 'glTF'); export it again", file=name)
    _, length, json_length, kind = struct.unpack_from("<IIII", head, 4)
    if length != size or kind != GLB_JSON or json_length > size - 20:
        raise MeshError(
            f"is cut short or damaged: it announces {length:,} bytes and has {size:,}; copy it again", file=name
        )
    with path.open("rb") as file:
        file.seek(20)
        text = file.read(json_length)
    try:
        scene = json.loads(text)
        accessors = scene.get("accessors", [])
        drawn = [piece for mesh in scene.get("meshes", []) for piece in mesh.get("primitives", [])]
        counts = [
            accessors[piece.get("indices", piece["attributes"]["POSITION"])]["count"] // 3
            for piece in drawn
            if piece.get("mode", 4) == 4
        ]
        count = sum(counts)
    except (ValueError, LookupError, TypeError, AttributeError, RecursionError):
        raise MeshError("is damaged: its description cannot be read; export it again", file=name) from None
    if any("uri" in buffer for buffer in scene.get("buffers", []) if isinstance(buffer, dict)):
        raise MeshError("keeps its data in other files; export it as one GLB", file=name)
    if count > MOST_TRIANGLES:
        raise too_many(count, name)


def _check_3mf(path: Path, head: bytes, size: int, name: str) -> None:
    if not head.startswith(b"PK"):
        raise MeshError("is no 3MF file (not a ZIP archive); export it again", file=name)
    count = 0
    try:
        with zipfile.ZipFile(path) as archive:
            for item in archive.infolist():
                if not item.filename.lower().endswith(".model"):
                    continue
                with archive.open(item) as file:
                    rest = b""
                    while chunk := file.read(CHUNK):
                        chunk = rest + chunk
                        count += chunk.count(b"<triangle ")
                        # what may be the first bytes of one more
                        rest = chunk[-len(b"<triangle ") + 1 :]
                        if count > MOST_TRIANGLES:
                            raise too_many(count, name)
    except (zipfile.BadZipFile, OSError, NotImplementedError, RuntimeError, EOFError, ValueError) as error:
        raise MeshError(f"is damaged: {printable(str(error), 120)}; export or copy it again", file=name) from None
    if count == 0:
        raise MeshError("has no triangles; export it as a surface mesh", file=name, count=0)


_CHECKS = {".stl": _check_stl, ".obj": _check_obj, ".ply": _check_ply, ".glb": _check_glb, ".3mf": _check_3mf}
