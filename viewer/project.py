"""The project file: TOML → ``Project``. Everything is checked here, once, and trusted afterwards.

All lengths of a ``Project`` are in mm, whatever unit the file uses. Knows no pixel and no command.
"""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal, cast

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.audit import audit
from knucklepath.kinematics.clearance.pairs import PairError, pairs_to_check
from knucklepath.kinematics.clearance.solids import RodStyle, Solid, generated_solids
from knucklepath.kinematics.errors import MechanismError, MeshError, ProjectError
from knucklepath.kinematics.mechanism import WHEEL_CENTRE, Layout
from knucklepath.kinematics.wheel import Corner, Spring, Vehicle, Wheel
from knucklepath.plugins.registry import Registry, load_registry
from knucklepath.viewer import permissions
from knucklepath.viewer.meshes import inside_folder, load_mesh
from knucklepath.viewer.reader import UNITS, Reader, dotted, nearest
from knucklepath.viewer.toml_lines import find_lines

Array = NDArray[np.float64]

#: A project file is read by people; one larger than this is something else.
MOST_BYTES = 4_000_000
#: Radii of wheels, mm, that are possible; and that are believable when a unit is to be guessed.
POSSIBLE_RADIUS = (60.0, 2_000.0)
BELIEVABLE_RADIUS = (120.0, 1_000.0)
#: No hardpoint of a corner is farther from its wheel centre, mm.
FARTHEST_POINT = 5_000.0
#: No wheel travels, and no rack moves, farther, mm.
MOST_TRAVEL = 1_000.0

TOP_KEYS = (
    "title",
    "layout",
    "axle",
    "units",
    "points",
    "wheel",
    "travel",
    "rack",
    "spring",
    "rods",
    "vehicle",
    "parts",
    "clearances",
    "loads",
    "plugins",
)


@dataclass(frozen=True)
class Part:
    """A mesh on a body: name, body ("wheel" stays "wheel"), file, vertices (n, 3) mm at the design position, faces."""

    name: str
    body: str
    mesh: str
    vertices: Array
    faces: NDArray[np.int32]
    colour: str | None
    dropped_triangles: int


@dataclass(frozen=True)
class ClearanceRule:
    """What must stay apart: two names (either may be "*") and the gap asked for, mm."""

    a: str
    b: str
    gap: float


@dataclass(frozen=True)
class LoadCase:
    """A load on the tyre: contact_force (3,) N, ground frame; aligning_moment N·m about z; how torque is reacted."""

    name: str
    contact_force: Array
    aligning_moment: float
    torque_reaction: Literal["knuckle", "drive shaft"]


@dataclass(frozen=True)
class Project:
    """One axle's suspension, read and checked; lengths in mm.

    bump, rebound : limits of travel, both positive; rack_each_way : None on an axle without a rack;
    unused_keys : keys that are valid but that no command uses yet.
    """

    path: Path
    title: str
    layout: Layout
    registry: Registry
    corner: Corner
    bump: float
    rebound: float
    rack_each_way: float | None
    parts: tuple[Part, ...]
    rods: RodStyle
    clearances: tuple[ClearanceRule, ...]
    loads: tuple[LoadCase, ...]
    unused_keys: tuple[str, ...]

    def solids(self) -> tuple[Solid, ...]:
        """Every solid: the parts, and the generated ones where no mesh stands."""
        return solids_of(self.corner, self.parts, self.rods)


def solids_of(corner: Corner, parts: Sequence[Part], rods: RodStyle) -> tuple[Solid, ...]:
    """Parts as solids, then the generated solids that no part replaces.

    A part replaces the generated solid of its own name; one on a rod, an arm, the knuckle or the rack replaces the
    solid that is generated for that body; on the wheel a name that speaks of the tyre or the rim replaces those.
    """
    generated = generated_solids(corner, rods)
    names = {part.name for part in parts}
    bodies = {part.body for part in parts}
    spoken = [part.name.lower().replace("tire", "tyre") for part in parts if part.body == "wheel"]
    kept = []
    for solid in generated:
        on_wheel = solid.body == "wheel" and any(solid.name in name for name in spoken)
        if solid.name not in names and not (solid.name == solid.body and solid.body in bodies) and not on_wheel:
            kept.append(solid)
    roles: dict[str, Any] = {"chassis": "chassis", corner.carrier: "knuckle", "wheel": "part"}
    as_solids = []
    for part in parts:
        role = roles.get(part.body, "arm")
        if part.body == "wheel":
            role = next((word for word in ("tyre", "rim") if word in part.name.lower().replace("tire", "tyre")), "part")
        as_solids.append(Solid(part.name, part.body, part.vertices, part.faces, part.colour, role=role))
    return (*as_solids, *kept)


def project_file(path: str | Path) -> Path:
    """The TOML file that PROJECT means: the file itself, or the one in a folder.

    Raises
    ------
    ProjectError : nothing there, or none or several TOML files in the folder.
    """
    given = Path(path)
    try:
        if given.is_dir():
            found = sorted(given.glob("*.toml"))
            if len(found) == 1:
                return found[0]
            if not found:
                raise ProjectError("the folder holds no project file (*.toml)", file=str(path))
            names = ", ".join(file.name for file in found)
            raise ProjectError(f"the folder holds several TOML files ({names}); name one of them", file=str(path))
        if not given.exists():
            raise ProjectError(
                "is not there; 'knucklepath new FOLDER --layout ID' makes a project to start from", file=str(path)
            )
    except (OSError, ValueError) as error:
        raise ProjectError(f"cannot be opened: {error}", file=str(path).replace("\0", "\\0")) from None
    return given


def load_project(path: str | Path, registry: Registry | None = None, allow_plugins: bool = False) -> Project:
    """Read and check a project file.

    Parameters
    ----------
    path : the TOML file, or the folder that holds one.
    registry : installed plugins; loaded here if None.
    allow_plugins : run the plugin files that the project names, and remember their content as allowed.

    Raises
    ------
    ProjectError : naming file, key, line, what is wrong and what would be right.
    """
    file = project_file(path)
    text = _read_text(file)
    lines = find_lines(text)
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        if lines.repeated:
            twice = lines.repeated[0]
            raise ProjectError(
                f"is given twice, first on line {twice.first}; keep one",
                file=str(file),
                key=dotted(twice.path),
                line=twice.second,
            ) from None
        message, line = _toml_fault(str(error))
        raise ProjectError(f"is not valid TOML: {message}", file=str(file), line=line) from None
    except RecursionError:
        raise ProjectError("is not valid TOML: nested too deeply", file=str(file)) from None
    top = Reader(data, (), str(file), lines)
    top.allow(*TOP_KEYS)
    units = top.text("units", "mm", choices=tuple(UNITS))
    top.scale = UNITS[units]
    registry = _with_local_plugins(top, file, registry, allow_plugins)
    layout = _layout(top, registry)
    title = top.text("title", file.stem)
    wheel = _wheel(top.table("wheel"), units)
    corner, each_way = _corner(top, layout, wheel, units)
    bump, rebound = _travel(top.table("travel"))
    parts = _parts(top, file, corner, units)
    rods = _rods(top, corner)
    solids = solids_of(corner, parts, rods)
    clearances = _clearances(top, corner, solids)
    loads = _loads(top)
    return Project(
        path=file,
        title=title,
        layout=layout,
        registry=registry,
        corner=corner,
        bump=bump,
        rebound=rebound,
        rack_each_way=each_way,
        parts=parts,
        rods=rods,
        clearances=clearances,
        loads=loads,
        unused_keys=_unused(corner, loads),
    )


def _read_text(file: Path) -> str:
    try:
        if file.stat().st_size > MOST_BYTES:
            raise ProjectError("is far too large for a project file; is it a mesh?", file=str(file))
        raw = file.read_bytes()
    except OSError as error:
        raise ProjectError(f"cannot be read: {error.strerror}", file=str(file)) from None
    try:
        return raw.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise ProjectError("is not a text file in UTF-8; save it as UTF-8 text", file=str(file), line=line) from None


def _toml_fault(text: str) -> tuple[str, int | None]:
    """Split tomllib's message from its "(at line 3, column 5)"."""
    message, _, place = text.rpartition(" (at ")
    if place.startswith("line "):
        return message, int(place.split(",")[0].removeprefix("line "))
    return text, None


def _with_local_plugins(top: Reader, file: Path, registry: Registry | None, allow_plugins: bool) -> Registry:
    """Load the plugin files that the project names, if the user has allowed their content."""
    names = top.data.get("plugins", [])
    if not isinstance(names, list) or not all(isinstance(name, str) for name in names):
        raise top.fault('must be a list of file names, for example ["my_layout.py"]', "plugins")
    if not names:
        return registry or load_registry()
    paths = []
    for name in names:
        if not name.endswith(".py"):
            raise top.fault(f"'{name}' is not a Python file", "plugins")
        try:
            paths.append(inside_folder(file.parent, name))
        except MeshError as error:
            raise top.fault(str(error), "plugins") from None
    if allow_plugins:
        permissions.allow(paths)
    elif permissions.not_allowed(paths):
        names = [path.name for path in permissions.not_allowed(paths)]
        raise top.fault(
            f"the project wants to run {', '.join(names)}, which you have not allowed in its present form; "
            "read it, then call again with --allow-plugins",
            "plugins",
        )
    loaded = load_registry(paths)
    for item in loaded.broken:
        if item.distribution in {path.name for path in paths}:
            raise top.fault(f"plugin {item.distribution} is broken: {item.reason}", "plugins")
    return loaded


def _layout(top: Reader, registry: Registry) -> Layout:
    name = top.text("layout", example='"double-a-arm"')
    if name not in registry.layouts:
        broken = [item for item in registry.broken if f"'{name}'" in item.reason]
        why = f". {broken[0].distribution} would bring it, but: {broken[0].reason}" if broken else ""
        raise top.fault(f"there is no layout '{name}'; {nearest(name, tuple(registry.layouts))}{why}", "layout")
    return registry.layouts[name]


def _wheel(table: Reader, units: str) -> Wheel:
    table.allow("centre", "camber_deg", "toe_deg", "loaded_radius", "tyre_radius", "tyre_width", "rim_diameter")
    radius = table.length("loaded_radius", example="255.0")
    if not POSSIBLE_RADIUS[0] <= radius <= POSSIBLE_RADIUS[1]:
        raise table.fault(
            f"a wheel of radius {radius:.4g} mm is not believable{_unit_hint(radius, units)}", "loaded_radius"
        )
    wheel = Wheel(
        centre=table.vector("centre"),
        loaded_radius=radius,
        camber_deg=table.number("camber_deg", 0.0, low=-45.0, high=45.0),
        toe_deg=table.number("toe_deg", 0.0, low=-45.0, high=45.0),
        tyre_radius=table.optional_length("tyre_radius"),
        tyre_width=table.optional_length("tyre_width"),
        rim_diameter=table.optional_length("rim_diameter"),
    )
    if wheel.centre[1] <= 0.0:
        raise table.fault("the file gives the left corner: y must be positive", "centre")
    if wheel.tyre_radius is not None and not radius * 0.9 <= wheel.tyre_radius <= radius * 1.5:
        raise table.fault("the free radius must be near the loaded radius, and not smaller", "tyre_radius")
    if wheel.rim_diameter is not None and wheel.rim_diameter / 2.0 >= wheel.outer_radius:
        raise table.fault("the rim must be smaller than the tyre; this is its diameter, not its radius", "rim_diameter")
    if wheel.tyre_width is not None and wheel.tyre_width > 4.0 * radius:
        raise table.fault(f"a tyre {wheel.tyre_width:g} mm wide is not believable", "tyre_width")
    return wheel


def _unit_hint(radius_mm: float, units: str) -> str:
    raw = radius_mm / UNITS[units]
    fitting = [unit for unit, factor in UNITS.items() if BELIEVABLE_RADIUS[0] <= raw * factor <= BELIEVABLE_RADIUS[1]]
    return f'; the file says units = "{units}", and "{fitting[0]}" would fit' if fitting else "; check the number"


def _points(top: Reader, layout: Layout, wheel: Wheel) -> dict[str, Array]:
    tables = top.table("points")
    tables.allow(*layout.points)
    points: dict[str, Array] = {}
    for name, wanted in layout.points.items():
        if name not in tables.data:
            raise tables.fault(f"the table [points.{name}] is missing; layout '{layout.id}' needs it")
        table = tables.table(name)
        table.allow(*wanted)
        for point in wanted:
            example = ", ".join(f"{value:g}" for value in layout.example[f"{name}.{point}"])
            value = table.vector(point, example=f"[{example}]")
            apart = float(np.linalg.norm(value - wheel.centre))
            if apart > FARTHEST_POINT:
                raise table.fault(
                    f"is {apart / 1000.0:.1f} m from the wheel centre; check the number and 'units'", point
                )
            points[f"{name}.{point}"] = value
    points[WHEEL_CENTRE] = wheel.centre
    return points


def _corner(top: Reader, layout: Layout, wheel: Wheel, units: str) -> tuple[Corner, float | None]:
    points = _points(top, layout, wheel)
    rack = top.optional_table("rack")
    each_way: float | None = None
    axis: Any = (0.0, 1.0, 0.0)
    if rack is not None:
        rack.allow("each_way", "axis")
        if not layout.steers:
            raise rack.fault(f"layout '{layout.id}' does not steer; leave [rack] out")
        each_way = rack.length("each_way", example="35.0")
        if each_way > MOST_TRAVEL:
            raise rack.fault(f"{each_way:g} mm of rack is not believable; check the number and 'units'", "each_way")
        axis = rack.vector("axis", (0.0, 1.0, 0.0), is_length=False, example="[0.0, 1.0, 0.0]")
        if np.linalg.norm(axis) < 1e-6:
            raise rack.fault("has no direction; [0.0, 1.0, 0.0] runs across the car", "axis")
    try:
        mechanism = layout.mechanism(points, steered=rack is not None, rack_axis=axis)
        audit(mechanism)
    except MechanismError as error:
        raise _at_point(top, layout, error) from None
    bare = Corner(mechanism, wheel, layout.carrier, layout.steering_axis)
    corner = Corner(
        mechanism=mechanism,
        wheel=wheel,
        carrier=layout.carrier,
        steering_axis=layout.steering_axis,
        axle=cast(Literal["front", "rear"], top.text("axle", "front", choices=("front", "rear"))),
        spring=_spring(top, bare),
        vehicle=_vehicle(top),
    )
    return corner, each_way


def _at_point(top: Reader, layout: Layout, error: MechanismError) -> ProjectError:
    """Give a mechanism's fault the key and line of the first hardpoint that its message names."""
    named = [(error.message.find(name), name) for name in layout.point_names if name in error.message]
    if named:
        table, point = min(named)[1].split(".")
        return top.table("points").table(table).fault(error.message, point)
    if error.body in layout.points or error.joint in layout.points:
        name = error.body if error.body in layout.points else error.joint
        return top.table("points").fault(error.message, name)
    return top.fault(error.message, "points")


def _spring(top: Reader, corner: Corner) -> Spring | None:
    table = top.optional_table("spring")
    if table is None:
        return None
    table.allow("chassis", "moving", "on", "shortest", "longest", "rate_n_per_mm", "preload_n")
    spring = Spring(
        chassis=table.vector("chassis"),
        moving=table.vector("moving"),
        on=_body(table, corner, "on"),
        shortest=table.optional_length("shortest"),
        longest=table.optional_length("longest"),
        rate_n_per_mm=table.optional_number("rate_n_per_mm", 0.0, 1e7),
        preload_n=table.optional_number("preload_n", -1e9, 1e9),
    )
    if spring.on == "chassis":
        raise table.fault("the moving end must stand on a body that moves, not on the chassis", "on")
    if np.linalg.norm(spring.chassis - spring.moving) < 1.0:
        raise table.fault("'chassis' and 'moving' are the same point; the spring has no length", "moving")
    if spring.shortest is not None and spring.longest is not None and spring.shortest >= spring.longest:
        raise table.fault("must be smaller than 'longest'", "shortest")
    return spring


def _body(table: Reader, corner: Corner, key: str) -> str:
    """A body's name as the mechanism calls it; "wheel" stays "wheel"."""
    name = table.text(key, example='"knuckle"')
    if name not in corner.body_names:
        hint = nearest(name, corner.body_names)
        if name == "rack":
            hint = "this axle has no [rack]"
        raise table.fault(f"there is no body '{name}'; {hint}", key)
    return name if name == "wheel" else corner.body(name)


def _vehicle(top: Reader) -> Vehicle | None:
    table = top.optional_table("vehicle")
    if table is None:
        return None
    table.allow("wheelbase", "centre_of_gravity_height", "front_brake_share", "front_drive_share")
    return Vehicle(
        wheelbase=table.optional_length("wheelbase"),
        centre_of_gravity_height=table.optional_length("centre_of_gravity_height"),
        front_brake_share=table.optional_number("front_brake_share", 0.0, 1.0),
        front_drive_share=table.optional_number("front_drive_share", 0.0, 1.0),
    )


def _travel(table: Reader) -> tuple[float, float]:
    table.allow("bump", "rebound")
    limits = []
    for key in ("bump", "rebound"):
        value = table.length(key, example="60.0")
        if value > MOST_TRAVEL:
            raise table.fault(f"{value:g} mm of travel is not believable; check the number and 'units'", key)
        limits.append(value)
    return limits[0], limits[1]


def _rods(top: Reader, corner: Corner) -> RodStyle:
    table = top.optional_table("rods")
    if table is None:
        return RodStyle()
    names = tuple(dict.fromkeys((*corner.mechanism.body_names[1:], "tyre", "rim")))
    table.allow("diameter", *names)
    diameter = table.length("diameter", 20.0)
    each: dict[str, float | None] = {}
    for name in names:
        own = table.optional_table(name)
        if own is None:
            continue
        own.allow("diameter", "shown")
        each[name] = own.length("diameter", diameter) if own.flag("shown", True) else None
    return RodStyle(diameter, each)


def _parts(top: Reader, file: Path, corner: Corner, units: str) -> tuple[Part, ...]:
    parts: list[Part] = []
    for table in top.tables("parts"):
        table.allow("name", "mesh", "on", "units", "placement", "colour")
        name = table.text("name", example='"knuckle casting"')
        if any(part.name == name for part in parts):
            raise table.fault(f"two parts are called '{name}'; give each its own name", "name")
        if name == "*":
            raise table.fault("'*' means every part in clearances; give the part another name", "name")
        body = _body(table, corner, "on")
        own_units = table.text("units", units, choices=tuple(UNITS)) if "units" in table.data else None
        placement = _placement(table)
        colour = table.text("colour", "") if "colour" in table.data else None
        if colour is not None and not _is_colour(colour):
            raise table.fault(f"'{colour}' is not a colour; write for example \"#7f8c8d\"", "colour")
        mesh = table.text("mesh", example='"parts/knuckle.stl"')
        try:
            loaded = load_mesh(inside_folder(file.parent, mesh), mesh, own_units, units)
        except MeshError as error:
            raise table.fault(str(error), "mesh") from None
        vertices = loaded.vertices if placement is None else loaded.vertices @ placement[:, :3].T + placement[:, 3]
        middle = (vertices.max(axis=0) + vertices.min(axis=0)) / 2.0
        if np.linalg.norm(middle - corner.wheel.centre) > FARTHEST_POINT:
            raise table.fault(
                f"{mesh} lies {np.linalg.norm(middle - corner.wheel.centre) / 1000.0:.1f} m from the wheel centre; "
                "draw it in the body frame, or give 'placement'",
                "mesh",
            )
        parts.append(Part(name, body, mesh, vertices, loaded.faces, colour, loaded.dropped))
    return tuple(parts)


def _placement(table: Reader) -> Array | None:
    """A 3 × 4 matrix whose left part is a rotation, the last column in mm."""
    if "placement" not in table.data:
        return None
    example = "[1,0,0,0, 0,1,0,0, 0,0,1,0]"
    matrix = table.vector("placement", count=12, is_length=False, example=example).reshape(3, 4)
    rotation = matrix[:, :3]
    if not np.allclose(rotation @ rotation.T, np.eye(3), atol=1e-4):
        raise table.fault(f"its left 3 × 3 part must be a rotation; no turn is {example}", "placement")
    if np.linalg.det(rotation) < 0.0:
        raise table.fault("its left 3 × 3 part mirrors the part; mirror the mesh file itself instead", "placement")
    return np.column_stack((rotation, matrix[:, 3] * table.scale))


def _is_colour(text: str) -> bool:
    return len(text) == 7 and text[0] == "#" and all(letter in "0123456789abcdefABCDEF" for letter in text[1:])


def _clearances(top: Reader, corner: Corner, solids: Sequence[Solid]) -> tuple[ClearanceRule, ...]:
    rules = []
    for table in top.tables("clearances"):
        table.allow("between", "gap")
        names = table.need("between", '["tyre", "lower_arm"]')
        if not isinstance(names, list) or len(names) != 2 or not all(isinstance(name, str) for name in names):
            raise table.fault('must be two names, for example ["tyre", "lower_arm"]', "between")
        a, b = names
        if a == b and a != "*":
            raise table.fault(f"'{a}' cannot keep a distance from itself", "between")
        rule = ClearanceRule(a, b, table.length("gap", positive=False, example="8.0"))
        if rule.gap < 0.0:
            raise table.fault("must not be negative", "gap")
        try:
            pairs_to_check(corner, solids, (rule,))
        except PairError as error:
            raise table.fault(str(error), "between") from None
        rules.append(rule)
    return tuple(rules)


def _loads(top: Reader) -> tuple[LoadCase, ...]:
    cases: list[LoadCase] = []
    for table in top.tables("loads"):
        table.allow("name", "contact_force", "aligning_moment", "torque_reaction")
        name = table.text("name", example='"right-hand bend, outer wheel"')
        if any(case.name == name for case in cases):
            raise table.fault(f"two load cases are called '{name}'; give each its own name", "name")
        force = table.vector("contact_force", is_length=False, example="[0.0, -2600.0, 3100.0]")
        reaction = table.text("torque_reaction", "knuckle", choices=("knuckle", "drive shaft"))
        moment = table.number("aligning_moment", 0.0)
        cases.append(LoadCase(name, force, moment, cast(Literal["knuckle", "drive shaft"], reaction)))
    return tuple(cases)


def _unused(corner: Corner, loads: Sequence[LoadCase]) -> tuple[str, ...]:
    """Valid keys whose results come with later commands."""
    keys = []
    spring = corner.spring
    if spring is not None:
        given = {
            "rate_n_per_mm": spring.rate_n_per_mm,
            "preload_n": spring.preload_n,
            "shortest": spring.shortest,
            "longest": spring.longest,
        }
        keys += [f"spring.{key}" for key, value in given.items() if value is not None]
    if loads:
        keys.append("loads")
    return tuple(keys)
