"""``knucklepath new``: a project to start from, for any layout, that loads, sweeps and checks at once."""

from __future__ import annotations

import json
import os
import shutil
import tempfile
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.errors import KnucklepathError, ProjectError
from knucklepath.kinematics.mechanism import CHASSIS, WHEEL_CENTRE, HingedBody, Layout, SlidingBody
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.viewer.exports.stl import binary_stl
from knucklepath.viewer.project import load_project
from knucklepath.viewer.source import dotted
from knucklepath.viewer.starter_parts import StarterPart, starter_parts

if TYPE_CHECKING:
    from knucklepath.plugins.registry import Registry

Array = NDArray[np.float64]

#: The project file's name.
FILE = "axle.toml"
#: What the headers of its meshes say.
MESH_TITLE = "invented part of a knucklepath starter project, mm"
#: Proportions over the loaded radius: free radius, tyre width, rim diameter, rods.
FREE_SHARE, WIDTH_SHARE, RIM_SHARE, ROD_SHARE = 1.02, 0.62, 1.30, 0.07
#: Bump, rebound and rack over the loaded radius: the first that the layout's example can do is taken.
BUMP_SHARE, REBOUND_SHARE, RACK_SHARE = 0.22, 0.20, 0.11
#: How a limit is shortened when the mechanism cannot reach it, or comes near a singular position.
SHORTER, NEAR_SINGULAR = 0.8, 0.3
#: Gaps asked for, over the loaded radius.
GAP_SHARE = 0.02


@dataclass(frozen=True)
class _Numbers:
    """What the starter invents besides the layout's example, mm."""

    corner: Corner
    rods: float
    bump: float
    rebound: float
    rack: float | None
    spring: tuple[Array, Array, str]


def make_starter(folder: str | Path, layout: Layout, registry: Registry) -> Path:
    """Make a starter project: a commented TOML file and STL parts.

    Parameters
    ----------
    folder : does not exist yet, or is empty.
    layout : any layout; its example gives the hardpoints.
    registry : the plugins to check the result with; the layout is among them.

    Returns
    -------
    The project file. The folder appears whole or not at all.

    Raises
    ------
    ProjectError : the folder is not empty or cannot be made; the layout's example makes no sound project.
    """
    target = Path(folder)
    try:
        if target.exists() and (not target.is_dir() or any(target.iterdir())):
            what = "is not empty" if target.is_dir() else "is a file"
            raise ProjectError(f"{what}; name a folder that does not exist yet, or an empty one", file=str(folder))
        place = Path(os.path.abspath(target))
        place.parent.mkdir(parents=True, exist_ok=True)
        building = Path(tempfile.mkdtemp(prefix=f".{place.name}-", dir=place.parent))
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        raise ProjectError(f"cannot be made: {reason}", file=str(folder)) from None
    try:
        _write(building, layout)
        load_project(building / FILE, registry)
        mask = os.umask(0)
        os.umask(mask)
        building.chmod(0o777 & ~mask)
        if place.is_dir():
            place.rmdir()
        building.rename(place)
    except KnucklepathError as error:
        raise ProjectError(
            f"the example of layout '{layout.id}' makes no sound project: {error}", file=str(folder)
        ) from error
    except OSError as error:
        raise ProjectError(f"cannot be made: {error.strerror or error}", file=str(folder)) from None
    finally:
        shutil.rmtree(building, ignore_errors=True)
    return target / FILE


def _write(folder: Path, layout: Layout) -> None:
    numbers = _invent(layout)
    parts = starter_parts(numbers.corner, numbers.rods)
    (folder / "parts").mkdir()
    for part in parts:
        (folder / "parts" / part.file).write_bytes(binary_stl(part.mesh, MESH_TITLE))
    (folder / FILE).write_text(_text_of(layout, numbers, parts), encoding="utf-8", newline="\n")


def _invent(layout: Layout) -> _Numbers:
    points = {name: np.asarray(point, dtype=float) for name, point in layout.example.items()}
    placed = np.stack(list(points.values()))
    diagonal = float(np.linalg.norm(np.ptp(placed, axis=0)))
    height = float(points[WHEEL_CENTRE][2])
    # a wheel that stands on z = 0, where that makes a sensible one
    radius = height if 0.15 * diagonal < height < diagonal else _tidy(0.4 * diagonal)
    wheel = Wheel(
        centre=points[WHEEL_CENTRE],
        loaded_radius=radius,
        camber_deg=-1.0,
        toe_deg=0.1,
        tyre_radius=_tidy(FREE_SHARE * radius),
        tyre_width=_tidy(WIDTH_SHARE * radius),
        rim_diameter=_tidy(RIM_SHARE * radius),
    )
    corner = Corner(layout.mechanism(points, steered=layout.steers), wheel, layout.carrier, layout.steering_axis)
    rack = None
    if corner.steered:
        rack = _reachable(corner, RACK_SHARE * radius, np.zeros(2), np.array([-1.0, 1.0]))
    locks = np.array([[-1.0, 0.0, 1.0]]) if rack else np.zeros((1, 1))
    bump, rebound = (
        _reachable(corner, share * radius, np.array([[sign], [0.5 * sign]]), locks, rack or 0.0)
        for share, sign in ((BUMP_SHARE, 1.0), (REBOUND_SHARE, -1.0))
    )
    return _Numbers(corner, _tidy(ROD_SHARE * radius, 1.0), bump, rebound, rack, _spring(corner))


def _reachable(corner: Corner, length: float, travel: Array, rack: Array, each_way: float | None = None) -> float:
    """The longest of ever shorter lengths that the mechanism reaches, clear of singular positions.

    ``travel`` and ``rack`` are shares of the length sought; those of the rack are of ``each_way`` where that is given.
    """
    for _ in range(30):
        tidy = _tidy(length)
        motion = solve_motion(corner, travel * tidy, rack * (tidy if each_way is None else each_way))
        if motion.reached.all() and (np.abs(motion.closeness) > NEAR_SINGULAR).all():
            return tidy
        length *= SHORTER
    raise ProjectError("its example cannot move")


def _tidy(length: float, step: float = 5.0) -> float:
    """A length as people would choose it: a multiple of 5 mm (or 1 mm), finer only when it is tiny."""
    while length < 2.0 * step:
        step /= 10.0
    return float(round(round(length / step) * step, 6))


def _spring(corner: Corner) -> tuple[Array, Array, str]:
    """Chassis end, moving end and body of a spring that suits the layout."""
    for body in corner.mechanism.bodies:
        # a strut is a spring and damper already
        if isinstance(body, SlidingBody) and not isinstance(body.axis, str) and body.parent != CHASSIS:
            return corner.point(body.axis[0]), corner.point(body.axis[1]), body.parent
    arms = [body for body in corner.mechanism.bodies if isinstance(body, HingedBody)]
    centre, radius = corner.wheel.centre, corner.wheel.loaded_radius
    if arms:
        arm = min(arms, key=lambda body: float(np.mean([corner.point(name)[2] for name in body.axis])))
        held = [corner.point(name) for name in corner.mechanism.attachments(arm.name) if name not in arm.axis]
        middle = np.mean([corner.point(name) for name in arm.axis], axis=0)
        moving = middle + 0.6 * (np.mean(held, axis=0) - middle)
        name = arm.name
    else:
        moving = centre - np.array([0.0, 0.55 * radius, 0.0])
        name = corner.carrier
    chassis = moving + radius * np.array([0.0, -0.3, 1.1])
    return np.round(chassis), np.round(moving), name


def _array(values: Array) -> str:
    return "[" + ", ".join(repr(float(value)) for value in values) + "]"


def _text_of(layout: Layout, numbers: _Numbers, parts: tuple[StarterPart, ...]) -> str:
    """The project file."""
    wheel = numbers.corner.wheel
    axle = '"front"' if layout.steers else '"rear"'
    lines = [
        f"# {layout.title}: a starter project. Every number in it is invented; put yours in their place.",
        "# Lengths in mm; x forward, y left, z up; the left corner, at the design position.",
        "# A geometric and static check for design review; it proves neither strength nor roadworthiness.",
        "",
        f"title  = {_quoted(f'Starter: {layout.title}')}",
        f"layout = {_quoted(layout.id)}",
        f"axle   = {axle:<23}  # front or rear",
        'units  = "mm"                    # mm, m or in: lengths here, and meshes that do not say otherwise',
        "",
    ]
    for table, named in layout.points.items():
        lines.append(f"[{dotted(('points', table))}]")
        width = max((len(dotted((name,))) for name in named), default=0)
        for name, about in named.items():
            point = _array(np.asarray(layout.example[f"{table}.{name}"]))
            lines.append(f"{dotted((name,)):<{width}} = {point:<28}  # {' '.join(about.split())}")
        lines.append("")
    lines += [
        "[wheel]",
        f"centre        = {_array(wheel.centre)}",
        f"camber_deg    = {wheel.camber_deg!r}           # + top leans outboard",
        f"toe_deg       = {wheel.toe_deg!r}            # + front of the wheel inboard",
        f"loaded_radius = {wheel.loaded_radius!r}          # wheel centre to contact point",
        f"tyre_radius   = {wheel.outer_radius!r}          # free outer radius, for clearance",
        f"tyre_width    = {wheel.tyre_width!r}",
        f"rim_diameter  = {wheel.rim_diameter!r}",
        "",
        "[travel]                         # limits of the wheel centre's travel, both positive",
        f"bump    = {numbers.bump!r}",
        f"rebound = {numbers.rebound!r}",
        "",
    ]
    if numbers.rack:
        lines += [
            "[rack]                           # leave this table out on an axle that does not steer",
            f"each_way = {numbers.rack!r}",
            "axis = [0.0, 1.0, 0.0]           # + moves the rack to the left",
            "",
        ]
    chassis, moving, on = numbers.spring
    lines += [
        "[spring]                         # a straight spring-damper unit, for its length and motion ratio",
        f"chassis = {_array(chassis)}",
        f"moving  = {_array(moving)}",
        f"on      = {_quoted(on)}" + " " * 6 + "# the body that carries the moving end",
        "",
        "[rods]                           # what the program draws and checks where no mesh stands",
        f"diameter = {numbers.rods!r}",
        "",
        "[vehicle]                        # for anti-dive, anti-lift and anti-squat",
        "wheelbase = 2500.0",
        "centre_of_gravity_height = 400.0",
        "front_brake_share = 0.6",
        "front_drive_share = 0.0",
        "",
        "# Parts take the place of what the program would draw for their body. Each is drawn in the body frame at the",
        "# design position; otherwise give  placement = [1,0,0,dx, 0,1,0,dy, 0,0,1,dz].",
    ]
    for part in parts:
        lines += [
            "[[parts]]",
            f"name   = {_quoted(part.name)}  # {part.about}",
            f"mesh   = {_quoted(f'parts/{part.file}')}",
            f"on     = {_quoted(part.body)}",
            f"colour = {_quoted(part.colour)}",
            "",
        ]
    gap = _tidy(GAP_SHARE * wheel.loaded_radius, 1.0)
    lines += [
        "[[clearances]]                   # what must stay apart over the whole motion; * is everything else",
        'between = ["tyre", "*"]',
        f"gap = {gap!r}",
        "",
        "# [[loads]]",
        '# name = "bend, outer wheel"',
        "# contact_force = [0.0, -2000.0, 2500.0]   # N on the tyre, ground frame",
        '# torque_reaction = "knuckle"              # or "drive shaft"',
    ]
    return "\n".join(lines) + "\n"


def _quoted(text: str) -> str:
    """A TOML string; JSON's escapes are TOML's."""
    return json.dumps(text, ensure_ascii=False).replace("\x7f", "\\u007f")
