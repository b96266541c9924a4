"""``knucklepath sweep``: readings over travel and rack."""

from __future__ import annotations

import argparse
import sys

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.viewer.commands.arguments import MOST_POSES, UsageError, check_rack, open_project, spread
from knucklepath.viewer.exports.tables import READABLE, figure, sweep_csv
from knucklepath.viewer.exports.writing import write_text
from knucklepath.viewer.project import Project
from knucklepath.viewer.reach import explain_limit

#: Poses over the project's limits where the user gives no count: for a file, and for reading.
FILE_COUNTS = (23, 15)
TABLE_COUNTS = (13, 3)
#: Width of the table where no terminal limits it.
WIDE = 200
#: Determinant of the Jacobian, over its design value, below which a pose is called near-singular.
NEAR_SINGULAR = 0.02


def run(options: argparse.Namespace) -> int:
    """Solve the sweep and write it; 1 when some poses cannot be reached."""
    project = open_project(options.project, options.allow_plugins, getattr(options, "quiet", False))
    travel_count, rack_count = FILE_COUNTS if options.csv else TABLE_COUNTS
    travel = (
        spread(options.travel, "--travel")
        if options.travel is not None
        else np.linspace(-project.rebound, project.bump, travel_count)
    )
    if options.rack is not None:
        rack = spread(options.rack, "--rack")
    elif project.rack_each_way and project.corner.steered:
        rack = np.linspace(-project.rack_each_way, project.rack_each_way, rack_count)
    else:
        rack = np.zeros(1)
    check_rack(project, rack)
    if len(travel) * len(rack) > MOST_POSES:
        raise UsageError(f"--travel and --rack: {len(travel) * len(rack)} poses; at most {MOST_POSES} in one sweep")
    motion = solve_motion(project.corner, travel[:, None], rack[None, :])
    if options.csv:
        write_text(options.csv, sweep_csv(motion, project.registry.readings))
    else:
        _show(project, motion, rack)
    return _judge(motion)


def _show(project: Project, motion: Motion, rack: NDArray[np.float64]) -> None:
    from rich.console import Console
    from rich.markup import escape
    from rich.table import Table

    console = Console()
    if not console.is_terminal:
        console = Console(width=WIDE)
    readings = [
        reading
        for reading in project.registry.readings
        if reading.available(project.corner)
        and (reading.id in READABLE or project.registry.origin[reading.id] != "knucklepath")
    ]
    console.print(
        f"[bold]{escape(project.title)}[/bold]  ({project.layout.title}, {project.corner.axle} axle, left corner)"
    )
    for column, at in enumerate(rack):
        part = motion[:, column]
        cells = {"travel\nmm": [figure(float(travel), "mm") for travel in part.travel_mm]}
        for reading in readings:
            values = reading.function(part)
            if not np.isnan(values).all():
                heading = "\n".join((*reading.title.lower().replace("-", "- ").split(), reading.unit or "–"))
                cells[heading] = [figure(float(value), reading.unit) for value in values]
        shown = _fitting(cells, console.width)
        table = Table(box=None, header_style="bold", padding=(0, 1))
        for heading in shown:
            table.add_column(heading, justify="right", no_wrap=True, vertical="bottom")
        for row in zip(*(cells[heading] for heading in shown), strict=True):
            table.add_row(*row)
        if project.corner.steered:
            console.print(f"rack {figure(float(at), 'mm')} mm")
        console.print(table)
        if len(shown) < len(cells):
            console.print(f"{len(cells) - len(shown)} more columns in a wider terminal; all of them with --csv")


def _fitting(cells: dict[str, list[str]], width: int) -> list[str]:
    """As many columns as fit side by side."""
    shown, used = [], 0
    for heading, values in cells.items():
        used += 2 + max(len(text) for text in (*heading.split("\n"), *values))
        if used > width:
            break
        shown.append(heading)
    return shown


def _judge(motion: Motion) -> int:
    near = motion.reached & (np.abs(motion.closeness) < NEAR_SINGULAR)
    if near.any():
        first = tuple(np.argwhere(near)[0])
        print(
            f"note: near-singular geometry at travel {motion.travel_mm[first]:+.1f} mm, rack "
            f"{motion.rack_mm[first]:+.1f} mm: small changes of the points make large changes of the readings there",
            file=sys.stderr,
        )
    if motion.reached.all():
        return 0
    print(f"knucklepath sweep: {explain_limit(motion)}", file=sys.stderr)
    return 1
