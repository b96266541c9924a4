"""``knucklepath clearance``: the smallest gap of each pair over the motion."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence

import numpy as np

from knucklepath.kinematics.clearance.gap import Gap
from knucklepath.kinematics.clearance.pairs import pairs_to_check
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.motion import solve_motion
from knucklepath.viewer import CAUTION
from knucklepath.viewer.commands.arguments import UsageError, explain_limit, note, number, open_project, write_text
from knucklepath.viewer.commands.progress import counting
from knucklepath.viewer.exports.gaps import gaps_json, pose_text
from knucklepath.viewer.exports.tables import figure
from knucklepath.viewer.project import ClearanceRule, Project

#: Poses at which distances are taken, travel × rack.
GRID = (23, 15)
#: Width of the table where no terminal limits it.
WIDE = 120


def run(options: argparse.Namespace) -> int:
    """Search the gaps and report them; 1 when a pair is too tight or touches, or the mechanism locks."""
    tolerance = number(options.tolerance, "--tolerance", positive=True)
    project = open_project(options.project, options.allow_plugins, getattr(options, "quiet", False))
    rules: Sequence[ClearanceRule] = project.clearances
    if options.pair is not None:
        rules = _one_pair(options.pair, project)
    travel = np.linspace(-project.rebound, project.bump, GRID[0])
    each_way = project.rack_each_way if project.corner.steered else None
    rack = np.linspace(-each_way, each_way, GRID[1]) if each_way else np.zeros(1)
    motion = solve_motion(project.corner, travel[:, None], rack[None, :])
    pairs = pairs_to_check(project.corner, project.solids(), rules)
    if not pairs:
        note("no pair to check: every two parts are joined, or stand on the same body")
    with counting("pairs") as progress:
        gaps = sampled_gaps(motion, pairs, tolerance_mm=tolerance, progress=progress)
    if options.json:
        write_text(options.json, gaps_json(motion, gaps, tolerance))
    if options.json != "-":
        _show(project, gaps, int(motion.reached.sum()))
    if not motion.reached.all():
        print(f"knucklepath clearance: {explain_limit(motion)}", file=sys.stderr)
        return 1
    return int(any(gap.verdict in ("tight", "touching") for gap in gaps))


def _one_pair(text: str, project: Project) -> tuple[ClearanceRule, ...]:
    """The rule for --pair A,B, with the gap that the project asks of that pair."""
    names = [word.strip() for word in text.split(",")]
    if len(names) != 2 or not all(names):
        raise UsageError(f"--pair: '{text}' is not a pair; write for example --pair tyre,lower_arm")
    a, b = names
    asked = [rule.gap for rule in project.clearances if {rule.a, rule.b} in ({a, b}, {a, "*"}, {b, "*"}, {"*"})]
    return (ClearanceRule(a, b, max(asked, default=0.0)),)


def _show(project: Project, gaps: Sequence[Gap], poses: int) -> None:
    from rich.console import Console
    from rich.markup import escape
    from rich.table import Table

    console = Console()
    if not console.is_terminal:
        console = Console(width=WIDE)
    console.print(f"[bold]{escape(project.title)}[/bold]  smallest gaps, worst first")
    table = Table(box=None, header_style="bold", padding=(0, 1))
    for heading, justify in (
        ("between", "left"),
        ("and", "left"),
        ("verdict", "left"),
        ("gap\nmm", "right"),
        ("required\nmm", "right"),
        ("at", "left"),
    ):
        table.add_column(heading, justify=justify)  # type: ignore[arg-type]
    for gap in gaps:
        loud = gap.verdict in ("tight", "touching")
        word = f"[bold]{gap.verdict}[/bold]" if loud else gap.verdict
        table.add_row(
            *gap.between, word, figure(gap.gap_mm, "gap"), figure(gap.required_mm, "mm"), pose_text(project, gap)
        )
    console.print(table)
    console.print(
        f"Sampled at {poses} poses and sharpened around the smallest; poses in between are not proven, so a gap that "
        "is large enough here is 'undecided', not 'clear'.",
        highlight=False,
    )
    for text in dict.fromkeys(gap.note for gap in gaps if gap.note):
        console.print(text, highlight=False, markup=False)
    console.print(CAUTION, style="italic", highlight=False)
