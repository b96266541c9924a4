"""Mesh files read and checked. trimesh is imported when the first one is read. Knows no suspension."""

from __future__ import annotations

import struct
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import MeshError
from knucklepath.viewer.reader import UNITS

Array: TypeAlias = NDArray[np.float64]

SUFFIXES = (".stl", ".obj", ".ply", ".glb", ".3mf")
#: More triangles than this are a whole car's CAD dump, not a part.
MOST_TRIANGLES = 5_000_000
#: A file larger than this cannot be below that many triangles in any of the formats.
MOST_BYTES = 1_500_000_000
#: A part's diagonal, mm: outside this the unit is wrong, between the second pair it is believable.
POSSIBLE_MM = (2.0, 10_000.0)
BELIEVABLE_MM = (15.0, 4_000.0)
#: Units that a format fixes by its standard: glTF 2.0 is in metres.
FORMAT_UNITS = {".glb": "m"}
#: Double area over the longest side squared below which a triangle has no direction that can be trusted.
SLIVER = 1e-9
#: Unit names of the 3MF core specification.
THREE_MF_UNITS = {"millimeter": 1.0, "centimeter": 10.0, "meter": 1000.0, "inch": 25.4, "foot": 304.8, "micron": 0.001}


@dataclass(frozen=True)
class LoadedMesh:
    """A sound mesh: vertices (n, 3) in mm, faces (m, 3), and how many degenerate triangles were dropped."""

    vertices: Array
    faces: NDArray[np.int32]
    dropped: int


def inside_folder(folder: Path, name: str) -> Path:
    """Path of a file that a project names, which must lie inside the project's folder.

    Raises
    ------
    MeshError : the path is absolute, climbs out, leads out through a link, or nothing is there.
    """
    given = Path(name)
    if given.is_absolute() or given.drive or "\\" in name or "\0" in name:
        raise MeshError("must be a path inside the project folder, with forward slashes", file=_printable(name))
    if ".." in given.parts:
        raise MeshError("leads out of the project folder ('..'); copy the file into it", file=name)
    path = folder / given
    try:
        real, root = path.resolve(strict=True), folder.resolve()
    except FileNotFoundError:
        near = _near_files(folder, given)
        raise MeshError(f"is not there{near}", file=name) from None
    except (OSError, RuntimeError) as error:
        raise MeshError(f"cannot be opened: {error}", file=name) from None
    if not real.is_relative_to(root):
        raise MeshError("is a link out of the project folder; copy the file itself into it", file=name)
    if not real.is_file():
        raise MeshError("is not a file", file=name)
    return real


def _printable(name: str) -> str:
    return name.replace("\0", "\\0")


def _near_files(folder: Path, given: Path) -> str:
    from difflib import get_close_matches

    place = (folder / given).parent
    try:
        names = sorted(entry.name for entry in place.iterdir()) if place.is_dir() else []
    except OSError:
        names = []
    near = get_close_matches(given.name, names, n=1)
    return (
        f"; did you mean '{(given.parent / near[0]).as_posix()}'?" if near else f" (looked in {place.name or place}/)"
    )


def load_mesh(path: Path, name: str, units: str | None, default_units: str) -> LoadedMesh:
    """Read a mesh file, in mm.

    Parameters
    ----------
    path, name : the file, and how the project calls it.
    units : stated for this part, or None: then the format's own unit counts, or else ``default_units``.

    Raises
    ------
    MeshError : with the count and the remedy, when the file is no usable mesh.
    """
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        raise MeshError(f"cannot be read: save it as {', '.join(s[1:].upper() for s in SUFFIXES)}", file=name)
    try:
        size = path.stat().st_size
        with path.open("rb") as file:
            head = file.read(1024)
    except OSError as error:
        raise MeshError(f"cannot be read: {error.strerror}", file=name) from None
    _check_head(head, size, suffix, name)
    scene = _read(path, suffix, name)
    vertices, faces = _arrays(scene, name)
    if units is None and suffix == ".3mf":
        scale = THREE_MF_UNITS.get(str(scene.units or "millimeter").lower(), 1.0)
    else:
        scale = UNITS[units or FORMAT_UNITS.get(suffix, default_units)]
    stated = units or FORMAT_UNITS.get(suffix, default_units)
    vertices, triangles, dropped = _cleaned(vertices * scale, faces, name)
    _check_size(vertices, scale, stated, name)
    return LoadedMesh(vertices, triangles, dropped)


def _check_head(head: bytes, size: int, suffix: str, name: str) -> None:
    """Refuse what shows at the beginning of the file."""
    if size == 0:
        raise MeshError("is empty (0 bytes); export it again", file=name)
    if size > MOST_BYTES:
        raise MeshError(f"has {size / 1e9:.1f} GB; simplify it below {MOST_TRIANGLES:,} triangles", file=name)
    start = head.lstrip(b"\xef\xbb\xbf \t\r\n").lower()
    if start.startswith((b"<!doctype", b"<html")):
        raise MeshError("is a web page, not a mesh; download the file itself", file=name)
    if suffix == ".stl":
        _check_stl(head, size, name)


def _check_stl(head: bytes, size: int, name: str) -> None:
    """A binary STL has an 80-byte header, a count, and 50 bytes a triangle; an ASCII one begins with "solid"."""
    if len(head) >= 84:
        (count,) = struct.unpack_from("<I", head, 80)
        if size == 84 + 50 * count:
            _check_count(count, name)
            return
    if head.lstrip().lower().startswith(b"solid") and b"\0" not in head:
        return
    if len(head) < 84:
        raise MeshError(f"is cut short: {size} bytes hold no STL; export it again", file=name)
    holds = (size - 84) // 50
    if count == 0 or count > 50 * MOST_TRIANGLES:
        raise MeshError("is not an STL file; export it again", file=name)
    raise MeshError(
        f"is cut short or damaged: it announces {count:,} triangles and holds {holds:,}; export it again",
        file=name,
        count=count,
    )


def _check_count(count: int, name: str) -> None:
    if count == 0:
        raise MeshError("has no triangles; export it again", file=name, count=0)
    if count > MOST_TRIANGLES:
        raise MeshError(
            f"has {count:,} triangles; at most {MOST_TRIANGLES:,} can be used: export it coarser or simplify it",
            file=name,
            count=count,
        )


def _read(path: Path, suffix: str, name: str) -> Any:
    """Let trimesh read the file; whatever goes wrong in there is said in one line."""
    import warnings

    import trimesh

    try:
        with path.open("rb") as file, warnings.catch_warnings():
            warnings.simplefilter("ignore")
            return trimesh.load_scene(file, file_type=suffix[1:], process=False)
    except MemoryError:
        raise MeshError("is too large for this machine's memory; simplify it", file=name) from None
    except Exception as error:
        reason = " ".join(str(error).split())[:160] or type(error).__name__
        raise MeshError(f"cannot be read as {suffix[1:].upper()} ({reason}); export it again", file=name) from None


def _arrays(scene: Any, name: str) -> tuple[Array, NDArray[np.int64]]:
    """All triangles of a scene, placed; refuses a file without any."""
    import trimesh

    try:
        pieces = [piece for piece in scene.dump() if isinstance(piece, trimesh.Trimesh) and len(piece.faces)]
    except Exception as error:
        raise MeshError(f"cannot be read: {' '.join(str(error).split())[:160]}", file=name) from None
    if not pieces:
        raise MeshError("has no triangles; export it as a surface mesh", file=name, count=0)
    count = sum(len(piece.faces) for piece in pieces)
    _check_count(count, name)
    offsets = np.cumsum([0, *(len(piece.vertices) for piece in pieces)])
    vertices = np.concatenate([np.asarray(piece.vertices, dtype=float) for piece in pieces])
    faces = np.concatenate(
        [np.asarray(piece.faces, dtype=np.int64) + offset for piece, offset in zip(pieces, offsets, strict=False)]
    )
    if faces.min() < 0 or faces.max() >= len(vertices):
        raise MeshError("has triangles whose corners are not in the file; export it again", file=name)
    return vertices, faces


def _cleaned(vertices: Array, faces: NDArray[np.int64], name: str) -> tuple[Array, NDArray[np.int32], int]:
    """Merge equal vertices, drop triangles without area, refuse coordinates that are not finite."""
    used = vertices[faces]
    bad = ~np.isfinite(used).all(axis=(1, 2))
    if bad.any():
        raise MeshError(
            f"has {int(bad.sum()):,} triangles with coordinates that are not finite; export it again",
            file=name,
            count=int(bad.sum()),
        )
    merged, index = np.unique(used.reshape(-1, 3), axis=0, return_inverse=True)
    triangles = index.reshape(-1, 3)
    a, b, c = (merged[triangles[:, k]] for k in range(3))
    with np.errstate(over="ignore", invalid="ignore"):
        double_area = np.linalg.norm(np.cross(b - a, c - a), axis=1)
        longest = np.max(
            [np.linalg.norm(b - a, axis=1), np.linalg.norm(c - b, axis=1), np.linalg.norm(a - c, axis=1)], axis=0
        )
        sound = double_area > SLIVER * longest * longest
    sound &= longest > 0.0
    dropped = int((~sound).sum())
    if dropped == len(triangles):
        raise MeshError(f"has only degenerate triangles ({dropped:,}); export it again", file=name, count=dropped)
    kept, compact = np.unique(triangles[sound], return_inverse=True)
    return merged[kept], compact.reshape(-1, 3).astype(np.int32), dropped


def _check_size(vertices: Array, scale: float, stated: str, name: str) -> None:
    """Refuse a size that no part has, and suggest the unit that fits."""
    with np.errstate(over="ignore"):
        diagonal = float(np.linalg.norm(vertices.max(axis=0) - vertices.min(axis=0)))
    if POSSIBLE_MM[0] <= diagonal <= POSSIBLE_MM[1]:
        return
    raw = diagonal / scale
    fitting = [unit for unit, factor in UNITS.items() if BELIEVABLE_MM[0] <= raw * factor <= BELIEVABLE_MM[1]]
    hint = (
        f'it fits if it is in {fitting[0]}: write units = "{fitting[0]}"'
        if fitting
        else "check what it was exported in"
    )
    raise MeshError(f"is {diagonal:.3g} mm across when read in {stated}; {hint}", file=name)
