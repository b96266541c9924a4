"""One picture of a pose, fit for a report: title, pose, readings, scale, date."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.kinematics.motion import solve_motion
from knucklepath.viewer.exports.studio import Studio
from knucklepath.viewer.exports.writing import whole_file
from knucklepath.viewer.project import Project
from knucklepath.viewer.reach import require_reached


def write_picture(
    project: Project,
    out: str | Path,
    *,
    travel_mm: float = 0.0,
    rack_mm: float = 0.0,
    look: str = "corner",
    show: Sequence[str] | None = None,
    size: tuple[int, int] = (1920, 1080),
    dark: bool = False,
    case: Any = None,
) -> None:
    """Draw a pose and write it as PNG, all or nothing.

    Parameters
    ----------
    travel_mm, rack_mm : the pose; look : corner, front, side, top, or "AZ,EL" in degrees.
    show : ids of overlays, None for the look's own; size : px; case : a load case for overlays that ask for one.

    Raises
    ------
    ReachError : the mechanism locks before the pose.
    KnucklepathError : not a PNG name, an unknown look or overlay, a folder that does not exist, or a machine that
        cannot draw.
    """
    if not str(out).lower().endswith(".png"):
        raise KnucklepathError(f"{out}: pictures are PNG; give a name that ends in .png")
    pose = solve_motion(project.corner, travel_mm, rack_mm)
    require_reached(pose)
    with whole_file(out) as path:
        with Studio(project, look_text=look, show=show, size=size, dark=dark, rack_mm=rack_mm) as studio:
            image = studio.frame(pose, case)
            for fault in studio.faults():
                print(f"note: {fault}", file=sys.stderr)
        image.save(path, "PNG", optimize=True)
