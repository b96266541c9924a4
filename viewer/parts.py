"""Parts: meshes on bodies, and which generated solids they take the place of. Draws nothing."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.solids import RodStyle, Role, Solid, generated_solids
from knucklepath.kinematics.errors import MeshError
from knucklepath.kinematics.mechanism import CHASSIS
from knucklepath.kinematics.wheel import Corner
from knucklepath.viewer.meshes import inside_folder, load_mesh
from knucklepath.viewer.plausible import FARTHEST_PART_MM, check_part_size, corner_region, in_words
from knucklepath.viewer.schema import MM_PER_UNIT
from knucklepath.viewer.source import Source, nearest, one_line, printable

Array = NDArray[np.float64]

#: How far a placement's left part may be from a rotation, entry by entry: people write four digits.
ROTATION_TOLERANCE = 1e-3
#: Words by which a part on the wheel says that it is the tyre, or the rim.
WHEEL_WORDS = {"tyre": "tyre", "tire": "tyre", "rim": "rim"}


@dataclass(frozen=True)
class Part:
    """A mesh on a body.

    name; body : the mechanism's body, "chassis" or "wheel"; mesh : the file; vertices (n, 3) mm, body frame of the
    car, design position; faces (m, 3); colour : "#rrggbb" or None; dropped_triangles : those without area.
    """

    name: str
    body: str
    mesh: Path
    vertices: Array
    faces: NDArray[np.int32]
    colour: str | None = None
    dropped_triangles: int = 0


def load_parts(
    source: Source, given: Sequence[Mapping[str, Any]], corner: Corner, bodies: Sequence[str], units: str
) -> tuple[Part, ...]:
    """Load the meshes of a project's parts.

    Parameters
    ----------
    given : the checked ``[[parts]]``; bodies : names of all bodies of the layout, to explain one that is not there;
    units : the project's.

    Raises
    ------
    ProjectError : a name twice, an unknown body, or a mesh that cannot be used, with the mesh's line.
    """
    points = {name: point for name, point in corner.mechanism.points.items() if name != "rack.axis"}
    region = corner_region(points, corner.wheel)
    names: dict[str, int] = {}
    bodies_of = []
    for position, part in enumerate(given):
        name = part["name"]
        if name == "*":
            raise source.error(("parts", position, "name"), "'*' means every part; give this one a name of its own")
        if name in names:
            raise source.error(
                ("parts", position, "name"),
                f"two parts are called '{printable(name)}' (the first is parts[{names[name] + 1}]); rename one of them",
            )
        names[name] = position
        bodies_of.append(body_of(source, ("parts", position, "on"), part["on"], corner, bodies))
    return tuple(
        _load(source, position, part, body, corner, region, units)
        for position, (part, body) in enumerate(zip(given, bodies_of, strict=True))
    )


def body_of(source: Source, path: tuple[str | int, ...], name: str, corner: Corner, bodies: Sequence[str]) -> str:
    """The body that a name means; "wheel" stays "wheel".

    Raises
    ------
    ProjectError : no such body, with the nearest name.
    """
    if name in corner.mechanism.body_names or name == "wheel":
        return name
    if name in corner.body_names:
        return corner.body(name)
    if name in bodies:
        raise source.error(
            path, f"there is no body '{name}' on an axle without [rack]; put the part on the chassis, or add [rack]"
        )
    near = nearest(name, list(corner.body_names))
    hint = f"did you mean '{near}'? " if near else ""
    raise source.error(path, f"there is no body '{printable(name)}'; {hint}Bodies: {', '.join(corner.body_names)}")


def _load(
    source: Source,
    position: int,
    part: Mapping[str, Any],
    body: str,
    corner: Corner,
    region: Array,
    units: str,
) -> Part:
    called = one_line(part["mesh"])
    try:
        file = inside_folder(source.folder, part["mesh"])
        mesh = load_mesh(file, part["mesh"])
        unit = part.get("units", units)
        if mesh.mm_per_unit is not None and "units" not in part:
            scale, unit = mesh.mm_per_unit, "mm"
        else:
            scale = MM_PER_UNIT[unit]
        vertices = mesh.vertices * scale
        faces = mesh.faces
        if "placement" in part:
            rotation, shift = _placement(source, position, part["placement"], MM_PER_UNIT[units])
            vertices = vertices @ rotation.T + shift
            if np.linalg.det(rotation) < 0.0:
                faces = np.ascontiguousarray(faces[:, ::-1])
        bounds = np.stack((vertices.min(axis=0), vertices.max(axis=0)))
        check_part_size(bounds, region, unit, called)
    except MeshError as error:
        raise source.error(("parts", position, "mesh"), one_line(str(error))) from error
    nearest_corner = np.clip(corner.wheel.centre, bounds[0], bounds[1])
    apart = float(np.linalg.norm(nearest_corner - corner.wheel.centre))
    if apart > FARTHEST_PART_MM:
        raise source.error(
            ("parts", position, "mesh"),
            f"{called}: lies {in_words(apart)} from the wheel centre; draw it in the body frame, or give 'placement'",
        )
    return Part(part["name"], body, file, vertices, faces, part.get("colour"), mesh.dropped_triangles)


def _placement(source: Source, position: int, numbers: Sequence[float], mm_per_unit: float) -> tuple[Array, Array]:
    """(3, 3) rotation or reflection and (3,) shift, mm, of twelve numbers, row by row."""
    matrix = np.asarray(numbers, dtype=float).reshape(3, 4)
    turn = matrix[:, :3]
    if not np.allclose(turn @ turn.T, np.eye(3), atol=ROTATION_TOLERANCE):
        raise source.error(
            ("parts", position, "placement"),
            "changes the part's size or shape: its first three columns must be a rotation (or a mirror image), the "
            "fourth the shift, row by row: [1,0,0,dx, 0,1,0,dy, 0,0,1,dz]; for another scale use 'units'",
        )
    return turn, matrix[:, 3] * mm_per_unit


def wheel_role(name: str) -> str | None:
    """ "tyre" or "rim" where the name of a part on the wheel says so."""
    lower = name.lower()
    return next((role for word, role in WHEEL_WORDS.items() if word in lower), None)


def all_solids(corner: Corner, parts: Sequence[Part], rods: RodStyle) -> tuple[Solid, ...]:
    """Parts as solids, then the generated solids whose place no part takes.

    A part takes the place of the generated solid of its own name, and of the one made for its body (a rod, an arm,
    the knuckle, the rack). The wheel carries several things: there only a part whose name speaks of the tyre or the
    rim replaces it.
    """
    names = {part.name for part in parts}
    bodies = {part.body for part in parts}
    replaced = names | {wheel_role(part.name) for part in parts if part.body == "wheel"}
    made = [
        solid
        for solid in generated_solids(corner, rods)
        if solid.name not in replaced and not (solid.name == solid.body and solid.body in bodies)
    ]
    return (*(_solid(part, corner) for part in parts), *made)


def _solid(part: Part, corner: Corner) -> Solid:
    role: Role = "part"
    if part.body == "wheel":
        role = "tyre" if wheel_role(part.name) == "tyre" else "rim" if wheel_role(part.name) == "rim" else "part"
    elif part.body == CHASSIS:
        role = "chassis"
    elif part.body == corner.carrier:
        role = "knuckle"
    elif part.body == "rack":
        role = "rack"
    elif any(rod.name == part.body for rod in corner.mechanism.rods):
        role = "rod"
    else:
        role = "arm"
    return Solid(part.name, part.body, part.vertices, part.faces, part.colour, generated=False, role=role)
