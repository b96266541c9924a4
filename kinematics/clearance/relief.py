"""Meshes with a sphere taken out: what is left of a part where contact at a joint is meant to be. Pure geometry."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.gap import sound_faces
from knucklepath.kinematics.clearance.pairs import Pair, PairError, Relief
from knucklepath.kinematics.clearance.solids import Solid

Array: TypeAlias = NDArray[np.float64]
Faces: TypeAlias = NDArray[np.int32]

#: Triangles across a sphere's surface are cut until their sides are shorter than this, mm.
FINEST_MM = 0.5
#: Halvings, at most, of a triangle across a sphere's surface.
MOST_CUTS = 12


def without_spheres(vertices: Array, faces: Faces, reliefs: Sequence[Relief]) -> tuple[Array, Faces]:
    """Triangles of a mesh that lie outside every relief sphere; those across a surface are cut along the way.

    What is left over at a surface reaches at most ``FINEST_MM`` into the sphere: contact is never ignored outside it.
    """
    corners = vertices[faces]
    for relief in reliefs:
        corners = _outside(corners, relief.centre, relief.radius_mm)
    flat = corners.reshape(-1, 3)
    unique, index = np.unique(flat, axis=0, return_inverse=True)
    return unique, index.reshape(-1, 3).astype(np.int32)


def relieved(solid: Solid, reliefs: Sequence[Relief]) -> Solid:
    """What relief spheres leave of a solid.

    Raises
    ------
    PairError : nothing is left.
    """
    vertices = np.asarray(solid.vertices, dtype=float)
    vertices, faces = without_spheres(vertices, sound_faces(solid, vertices), reliefs)
    if not len(faces):
        raise PairError(f"the relief swallows all of '{solid.name}'; make it smaller")
    return replace(solid, vertices=vertices, faces=faces)


def relief_note(pair: Pair) -> str:
    """What a report says of a pair's relief."""
    joints = " and ".join(relief.joint for relief in pair.relief)
    return f"{pair.a.name} and {pair.b.name}: contact within {pair.relief[0].radius_mm:g} mm of {joints} is ignored."


def _outside(corners: Array, centre: Array, radius: float) -> Array:
    kept: list[Array] = []
    for _ in range(MOST_CUTS):
        within = np.linalg.norm(corners - centre, axis=2) < radius
        # a triangle's points are no farther out than its corners: three within are wholly within
        corners, within = corners[~within.all(axis=1)], within[~within.all(axis=1)]
        sides = np.linalg.norm(corners - np.roll(corners, -1, axis=1), axis=2)
        longest = sides.max(axis=1)
        middle = corners.mean(axis=1)
        reach = np.linalg.norm(corners - middle[:, None], axis=2).max(axis=1)
        clear = np.linalg.norm(middle - centre, axis=1) - reach >= radius
        done = clear | (longest < FINEST_MM)
        kept.append(corners[done])
        corners, sides = corners[~done], sides[~done]
        if not len(corners):
            break
        edge = sides.argmax(axis=1)
        rows = np.arange(len(corners))
        a, b, c = (corners[rows, (edge + k) % 3] for k in range(3))
        cut = (a + b) / 2.0
        corners = np.concatenate((np.stack((a, cut, c), axis=1), np.stack((cut, b, c), axis=1)))
    else:
        kept.append(corners)
    return np.concatenate(kept)
