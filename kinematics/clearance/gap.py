"""What a clearance check answers for a pair, and what every way of checking needs. Knows no distance engine."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.errors import MeshError
from knucklepath.kinematics.motion import Motion

Array: TypeAlias = NDArray[np.float64]
Verdict: TypeAlias = Literal["clear", "tight", "touching", "undecided"]

#: What a proof takes for granted, for every report.
ASSUMPTIONS = (
    "Gaps are proven for rigid parts as drawn and joints without play, at every pose of the stated travel and rack; "
    "limits of joints, spring, shaft and lock-up are searched, not proven. The motion is taken from polynomials that "
    "keep to solved poses within a millionth of a millimetre where tried, unless a pair says otherwise."
)
#: What a sampled search is not, for every report.
SAMPLED = (
    "Sampled on a grid of poses and sharpened around the smallest gap; poses in between are not proven, so a gap that "
    "is large enough here is 'undecided', not 'clear'."
)
#: Triangles with less than this area, mm², have no direction and only confuse a distance engine.
LEAST_AREA = 1e-12


@dataclass(frozen=True)
class Gap:
    """The smallest gap found for a pair.

    Attributes
    ----------
    between : the two names; required_mm : what was asked.
    verdict : "clear" is proven; "tight" and "touching" are found; "undecided" is a gap that is large enough but not
        proven.
    gap_mm : smallest distance found, 0 when touching; proven_gap_mm : no pose comes nearer than this, None where
        nothing is proven.
    travel_mm, rack_mm : the pose; point_a_mm, point_b_mm (3,) : nearest points at that pose, body frame of the car.
    evaluations : distances computed; note : what a reader must know besides, or "".
    """

    between: tuple[str, str]
    required_mm: float
    verdict: Verdict
    gap_mm: float
    proven_gap_mm: float | None
    travel_mm: float
    rack_mm: float
    point_a_mm: Array
    point_b_mm: Array
    evaluations: int
    note: str = ""


def worst_first(gaps: Iterable[Gap]) -> list[Gap]:
    """Touching first, then by how much is missing or to spare."""
    return sorted(gaps, key=lambda gap: (gap.verdict != "touching", gap.gap_mm - gap.required_mm))


def sound_faces(solid: Solid, vertices: Array) -> NDArray[np.int32]:
    """Triangles with an area, of a solid with these vertices (n, 3).

    Raises
    ------
    MeshError : the solid has none, or coordinates that are not finite.
    """
    faces = np.ascontiguousarray(solid.faces, dtype=np.int32)
    if not np.isfinite(vertices).all():
        raise MeshError(f"part '{solid.name}' has coordinates that are not finite")
    if len(faces):
        a, b, c = (vertices[faces[:, k]] for k in range(3))
        faces = faces[np.linalg.norm(np.cross(b - a, c - a), axis=1) > 2.0 * LEAST_AREA]
    if not len(faces):
        raise MeshError(f"part '{solid.name}' has no triangle with an area")
    return np.ascontiguousarray(faces)


def relative_poses(motion: Motion, a: str, b: str) -> tuple[Array, Array]:
    """Pose of body b as seen from body a: rotations (n, 3, 3) and translations (n, 3), poses flattened."""
    rotation_a, rotation_b = (motion.rotation(name).reshape(-1, 3, 3) for name in (a, b))
    shift = (motion.translation(b) - motion.translation(a)).reshape(-1, 3)
    back = np.swapaxes(rotation_a, -1, -2)
    return back @ rotation_b, (back @ shift[..., None])[..., 0]
