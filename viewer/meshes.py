"""Meshes loaded and made sound: finite, merged, without triangles that have no area. Knows no project.

trimesh reads the files; it is imported when the first mesh is loaded.
"""

from __future__ import annotations

import io
import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import MeshError
from knucklepath.viewer.mesh_files import MOST_TRIANGLES, check_mesh_file, inside_folder, too_many
from knucklepath.viewer.source import one_line, printable

__all__ = ["MeshData", "inside_folder", "load_mesh"]

Array = NDArray[np.float64]

#: Height of a triangle over its longest side at or below which it has no area: single precision, as in STL, cannot
#: tell its normal.
FLAT_SHARE = 1e-7
#: Unit names of the 3MF core specification, in mm.
THREE_MF_UNITS = {"micron": 1e-3, "millimeter": 1.0, "centimeter": 10.0, "inch": 25.4, "foot": 304.8, "meter": 1000.0}


@dataclass(frozen=True)
class MeshData:
    """A sound mesh in the file's own unit.

    vertices (n, 3); faces (m, 3); dropped_triangles : how many had no area; mm_per_unit : stated by the file itself
    (3MF), or None.
    """

    vertices: Array
    faces: NDArray[np.int32]
    dropped_triangles: int
    mm_per_unit: float | None


def load_mesh(path: Path, name: str | None = None) -> MeshData:
    """Load a mesh file.

    Parameters
    ----------
    path : STL (ASCII or binary), OBJ, PLY, GLB or 3MF; several objects in one file become one mesh.
    name : how messages call it; its path if None.

    Raises
    ------
    MeshError : it cannot be read; it is cut short, empty, too large, or has coordinates that are not finite.
    """
    called = one_line(str(path) if name is None else name)
    try:
        check_mesh_file(path, called)
        pieces, unit = _read(path, called)
    except OSError as error:
        raise MeshError(f"cannot be read: {error.strerror or error}", file=called) from None
    except MemoryError:
        raise MeshError("is too large for this machine's memory; export it coarser", file=called) from None
    if not pieces:
        raise MeshError("has no triangles; export it as a surface mesh", file=called, count=0)
    offsets = np.cumsum([0, *(len(vertices) for vertices, _ in pieces)])
    vertices = np.concatenate([vertices for vertices, _ in pieces])
    faces = np.concatenate([faces + offset for (_, faces), offset in zip(pieces, offsets, strict=False)])
    if len(faces) > MOST_TRIANGLES:
        raise too_many(len(faces), called)
    if faces.min() < 0 or faces.max() >= len(vertices):
        raise MeshError("has triangles with corners that are not in the file; export it again", file=called)
    bad = int((~np.isfinite(vertices).all(axis=1)[faces].all(axis=1)).sum())
    if bad:
        raise MeshError(
            f"has {bad:,} of {len(faces):,} triangles with coordinates that are not finite; export it again",
            file=called,
            count=bad,
        )
    vertices, faces = _merged(vertices, faces)
    sound = _has_area(vertices, faces)
    dropped = int((~sound).sum())
    if dropped == len(faces):
        raise MeshError(f"has only triangles without area ({dropped:,}); export it again", file=called, count=dropped)
    if dropped:
        vertices, faces = _merged(vertices, faces[sound])
    return MeshData(vertices, faces.astype(np.int32), dropped, unit)


def _read(path: Path, name: str) -> tuple[list[tuple[Array, NDArray[np.int64]]], float | None]:
    """Every object of a file as vertices and faces, placed, and the unit that the file states, in mm."""
    import trimesh

    # bytes, not a path: a parser then cannot follow references to other files
    content = io.BytesIO(path.read_bytes())
    suffix = path.suffix.lower()[1:]
    try:
        with warnings.catch_warnings(), np.errstate(all="ignore"):
            warnings.simplefilter("ignore")
            loaded: Any = trimesh.load(content, file_type=suffix, process=False)
            found = loaded.dump() if isinstance(loaded, trimesh.Scene) else [loaded]
            pieces = [
                (np.asarray(piece.vertices, dtype=float), np.asarray(piece.faces, dtype=np.int64))
                for piece in found
                if isinstance(piece, trimesh.Trimesh) and len(piece.faces)
            ]
    except (OSError, MemoryError):
        raise
    except Exception as error:
        # the parsers of five formats raise whatever comes; here it all means one thing
        reason = printable(" ".join(str(error).split()), 120) or type(error).__name__
        raise MeshError(f"cannot be read as {suffix.upper()} ({reason}); export it again", file=name) from None
    unit = None
    if suffix == "3mf":
        unit = THREE_MF_UNITS.get(str(getattr(loaded, "units", None) or "millimeter").rstrip("s").lower())
    return pieces, unit


def _merged(vertices: Array, faces: NDArray[np.int64]) -> tuple[Array, NDArray[np.int64]]:
    """Merge equal vertices and leave out those that no face uses; the order of the faces stays."""
    used, compact = np.unique(faces, return_inverse=True)
    # rows compared as raw bytes sort several times faster; adding 0 makes −0 and 0 the same bytes
    rows = np.ascontiguousarray(vertices[used] + 0.0)
    _, first, index = np.unique(
        rows.view([("", rows.dtype, 3)]).ravel().view("V24"), return_index=True, return_inverse=True
    )
    return rows[first], index.reshape(-1)[compact.reshape(faces.shape)]


def _has_area(vertices: Array, faces: NDArray[np.int64]) -> NDArray[np.bool_]:
    """(m,) True where a triangle has a height that can be told from nothing."""
    a, b, c = (vertices[faces[:, corner]] for corner in range(3))
    # scaled, so that neither tiny nor huge units under- or overflow
    with np.errstate(over="ignore"):
        size = max(float(np.ptp(vertices, axis=0).max()), np.finfo(float).tiny)
    ab, bc, ca = (b - a) / size, (c - b) / size, (a - c) / size
    longest = np.max([np.linalg.norm(side, axis=1) for side in (ab, bc, ca)], axis=0)
    double_area = np.linalg.norm(np.cross(ab, ca), axis=1)
    return np.asarray((longest > 0.0) & (double_area > FLAT_SHARE * longest * longest))
