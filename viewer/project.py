"""The project file: TOML → ``Project``. Everything is checked here, once, and trusted afterwards.

All lengths of a ``Project`` are in mm, whatever unit the file uses. Knows no pixel and no command.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from knucklepath.kinematics.clearance.solids import RodStyle, Solid
from knucklepath.kinematics.errors import MeshError
from knucklepath.kinematics.limits import DriveShaft, JointLimit
from knucklepath.kinematics.mechanism import Layout
from knucklepath.kinematics.wheel import Corner
from knucklepath.viewer import permissions
from knucklepath.viewer.build import (
    ClearanceRule,
    LoadCase,
    build_corner,
    build_drive_shaft,
    build_joint_limits,
    build_loads,
    build_rods,
    build_rules,
    unused_keys,
)
from knucklepath.viewer.checking import check, check_value, refuse_unknown
from knucklepath.viewer.meshes import inside_folder
from knucklepath.viewer.parts import Part, all_solids, load_parts
from knucklepath.viewer.schema import (
    LAYOUT,
    MM_PER_UNIT,
    NOT_USED_YET,
    PLUGINS,
    SEVERAL,
    TOP_KEYS,
    UNITS,
    project_schema,
)
from knucklepath.viewer.source import Source, nearest, one_line, printable, read_source

if TYPE_CHECKING:
    from knucklepath.plugins.registry import Registry

__all__ = ["ClearanceRule", "LoadCase", "Part", "Project", "RodStyle", "load_project"]


@dataclass(frozen=True)
class Project:
    """One axle's suspension, read and checked. Lengths in mm.

    Attributes
    ----------
    path : the TOML file; title : for people; layout; registry : the plugins it was read with; corner.
    bump, rebound : limits of the wheel centre's travel, both positive; rack_each_way : None on an axle without rack.
    parts, rods, clearances, loads : as in the file.
    unused_keys : dotted keys whose results come with a later command.
    """

    path: Path
    title: str
    layout: Layout
    registry: Registry
    corner: Corner
    bump: float
    rebound: float
    rack_each_way: float | None
    parts: tuple[Part, ...] = ()
    rods: RodStyle = field(default_factory=RodStyle)
    clearances: tuple[ClearanceRule, ...] = ()
    loads: tuple[LoadCase, ...] = ()
    joint_limits: tuple[JointLimit, ...] = ()
    drive_shaft: DriveShaft | None = None
    unused_keys: tuple[str, ...] = ()

    def solids(self) -> tuple[Solid, ...]:
        """Every solid: the parts, then the generated ones where no mesh stands."""
        return all_solids(self.corner, self.parts, self.rods)


def load_project(path: str | Path, registry: Registry | None = None, allow_plugins: bool = False) -> Project:
    """Read and check a project.

    Parameters
    ----------
    path : the TOML file, or the folder that holds one.
    registry : the plugins to use; all installed ones if None.
    allow_plugins : run the plugin files that the project names, and remember their content as allowed.

    Raises
    ------
    ProjectError : the first thing that is wrong, with file, key, line and what would be right.
    """
    source = read_source(path, SEVERAL)
    refuse_unknown(source, (), source.data, list(TOP_KEYS))
    units = check_value(source, ("units",), UNITS, source.data.get("units", "mm"))
    registry = _plugins(source, registry, allow_plugins)
    layout = _layout(source, registry)
    if "rack" in source.data and not layout.steers:
        raise source.error(("rack",), f"layout '{layout.id}' does not steer; take [rack] out")
    values = check(source, project_schema(layout), MM_PER_UNIT[units])
    corner = build_corner(source, layout, values, units)
    rods = build_rods(values.get("rods", {}))
    loads = build_loads(source, values.get("loads", ()))
    bodies = [body.name for body in layout.bodies]
    parts = load_parts(source, values.get("parts", ()), corner, bodies, units)
    rules: Sequence[Any] = values.get("clearances", ())
    clearances = build_rules(source, rules, corner, all_solids(corner, parts, rods)) if rules else ()
    return Project(
        path=source.path,
        title=values.get("title", source.path.stem),
        layout=layout,
        registry=registry,
        corner=corner,
        bump=values["travel"]["bump"],
        rebound=values["travel"]["rebound"],
        rack_each_way=values["rack"]["each_way"] if "rack" in values else None,
        parts=parts,
        rods=rods,
        clearances=clearances,
        loads=loads,
        joint_limits=build_joint_limits(source, values.get("joint_limits", ()), corner),
        drive_shaft=build_drive_shaft(source, values["drive_shaft"]) if "drive_shaft" in values else None,
        unused_keys=unused_keys(source.data, NOT_USED_YET),
    )


def _layout(source: Source, registry: Registry) -> Layout:
    known = list(registry.layouts)
    if "layout" not in source.data:
        raise source.error(("layout",), f"is missing; add layout = {LAYOUT.example}. Layouts: {', '.join(known)}")
    name = check_value(source, ("layout",), LAYOUT, source.data["layout"])
    if name in registry.layouts:
        return registry.layouts[name]
    broken = next((item for item in registry.broken if f"'{name}'" in item.reason), None)
    near = nearest(name, known)
    hint = f"did you mean '{near}'? " if near else ""
    why = f"; {broken.distribution} would bring it, but: {one_line(broken.reason)}" if broken else ""
    raise source.error(
        ("layout",), f"there is no layout '{printable(name)}'; {hint}Layouts: {', '.join(known)}{one_line(why)}"
    )


def _plugins(source: Source, registry: Registry | None, allow_plugins: bool) -> Registry:
    """The plugins that a project is read with; its own files only where the user has allowed their content."""
    from knucklepath.plugins.registry import load_registry

    named = check_value(source, ("plugins",), PLUGINS, source.data.get("plugins", []))
    files = []
    for position, name in enumerate(named):
        path = ("plugins", position)
        if not name.endswith(".py"):
            raise source.error(path, f"'{printable(name)}' is not a Python file (.py)")
        try:
            files.append(inside_folder(source.folder, name))
        except MeshError as error:
            raise source.error(path, one_line(str(error))) from error
    if not files:
        return load_registry() if registry is None else registry
    try:
        refused = [] if allow_plugins else permissions.not_allowed(files)
        if allow_plugins:
            permissions.allow(files)
    except OSError as error:
        raise source.error(("plugins",), f"cannot be read: {error.strerror or error}") from error
    if refused:
        names = ", ".join(printable(file.name) for file in refused)
        raise source.error(
            ("plugins",),
            f"the project would run {names}, which you have not allowed in its present form; read it, then call again "
            "with --allow-plugins",
        )
    loaded = load_registry(files)
    called = {file.name for file in files}
    for broken in loaded.broken:
        if broken.distribution in called:
            raise source.error(("plugins",), f"{printable(broken.distribution)} is broken: {one_line(broken.reason)}")
    return loaded
