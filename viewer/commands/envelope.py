"""``knucklepath envelope``: the volume that a part sweeps over the motion."""

from __future__ import annotations

import argparse
from difflib import get_close_matches

from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.viewer import CAUTION
from knucklepath.viewer.commands.arguments import UsageError, note, number, open_project
from knucklepath.viewer.commands.progress import counting
from knucklepath.viewer.exports.envelope import write_envelope
from knucklepath.viewer.project import Project


def run(options: argparse.Namespace) -> int:
    """Sweep the part and write the mesh."""
    margin = number(options.margin, "--margin")
    if margin < 0.0:
        raise UsageError(f"--margin: {margin:g} must not be negative")
    if not options.out.lower().endswith(".stl"):
        raise UsageError(f"{options.out}: the envelope is an STL; give a name that ends in .stl")
    try:
        from knucklepath.kinematics.clearance.envelope import engine_is_compiled, swept_envelope
    except ImportError:
        raise UsageError("the envelope needs numba: pip install numba") from None
    project = open_project(options.project, options.allow_plugins)
    part = _part(project, options.part)
    if options.on not in project.corner.body_names:
        near = get_close_matches(options.on, project.corner.body_names, n=1)
        hint = f"did you mean '{near[0]}'? " if near else ""
        raise UsageError(f"--on: there is no body '{options.on}'; {hint}Bodies: {', '.join(project.corner.body_names)}")
    each_way = (project.rack_each_way if project.corner.steered else None) or 0.0
    if not engine_is_compiled():
        note("compiling the sweep for this machine; this takes some seconds, once")
    with counting("slices") as progress:
        envelope = swept_envelope(
            project.corner,
            part,
            (-project.rebound, project.bump),
            (-each_way, each_way),
            on=options.on,
            margin_mm=margin,
            progress=progress,
        )
    write_envelope(envelope, options.out)
    size = envelope.high - envelope.low
    print(f"{options.out}: what '{part.name}' sweeps as seen from '{options.on}'")
    print(f"  volume {envelope.volume_mm3 / 1e6:.2f} litres, box {size[0]:.0f} × {size[1]:.0f} × {size[2]:.0f} mm")
    corners = (", ".join(f"{value:.1f}" for value in end) for end in (envelope.low, envelope.high))
    print("  from ({}) to ({}) mm, body frame".format(*corners).replace("-", "−"))
    print(
        f"  contains every pose with at least {envelope.margin_mm:g} mm to spare, and with at most "
        f"{envelope.convex_fatness_mm:.1f} mm where the sweep is flat or bulges, {envelope.fatness_mm:.1f} mm anywhere"
    )
    print(f"  {len(envelope.faces):,} triangles from {envelope.poses:,} poses; closed cavities are filled")
    print(CAUTION)
    return 0


def _part(project: Project, name: str) -> Solid:
    """The one solid that a name means."""
    solids = project.solids()
    found = [solid for solid in solids if solid.name == name] or [solid for solid in solids if solid.role == name]
    if not found:
        known = [solid.name for solid in solids]
        near = get_close_matches(name, known, n=1)
        hint = f"did you mean '{near[0]}'? " if near else ""
        raise UsageError(f"--part: there is no part '{name}'; {hint}Parts: {', '.join(known)}")
    if len(found) > 1:
        note(f"several parts are '{name}'; '{found[0].name}' is swept")
    return found[0]
