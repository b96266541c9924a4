"""``knucklepath clearance``: the smallest gap of each pair over the motion."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from knucklepath.kinematics.clearance.gap import ASSUMPTIONS, SAMPLED, Gap, worst_first
from knucklepath.kinematics.clearance.pairs import Pair, pairs_to_check
from knucklepath.kinematics.clearance.sampled import sampled_gaps
from knucklepath.kinematics.limits import LimitResult, check_limits
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.viewer import CAUTION
from knucklepath.viewer.commands.arguments import UsageError, note, number, open_project
from knucklepath.viewer.commands.progress import counting
from knucklepath.viewer.exports.gaps import gaps_json, pose_text
from knucklepath.viewer.exports.tables import figure
from knucklepath.viewer.exports.writing import write_text
from knucklepath.viewer.project import ClearanceRule, Project
from knucklepath.viewer.reach import explain_limit

if TYPE_CHECKING:
    from rich.table import Table

#: Poses that tell where the mechanism locks, and at which distances are sampled where they cannot be proven.
GRID = (23, 15)
#: Width of the table where no terminal limits it.
WIDE = 120


def run(options: argparse.Namespace) -> int:
    """Prove or refute the gaps and report them; 1 when anything is not clear, or the mechanism locks."""
    tolerance = number(options.tolerance, "--tolerance", positive=True)
    if options.map and not options.map.lower().endswith(".png"):
        raise UsageError(f"--map: {options.map} is no PNG; give a name that ends in .png")
    project = open_project(options.project, options.allow_plugins, getattr(options, "quiet", False))
    rules: Sequence[ClearanceRule] = project.clearances
    if options.pair is not None:
        rules = _one_pair(options.pair, project)
    each_way = (project.rack_each_way if project.corner.steered else None) or 0.0
    travel = np.linspace(-project.rebound, project.bump, GRID[0])
    rack = np.linspace(-each_way, each_way, GRID[1] if each_way else 1)
    motion = solve_motion(project.corner, travel[:, None], rack[None, :])
    pairs = pairs_to_check(project.corner, project.solids(), rules)
    if not pairs:
        note("no pair to check: every two parts are joined, or stand on the same body")
    gaps, method, stopped = _check(project, motion, pairs, tolerance)
    limits = [] if options.pair is not None or stopped else _limits(project, motion)
    if options.json:
        write_text(options.json, gaps_json(motion, gaps, limits, tolerance, method))
    if options.json != "-":
        _show(project, gaps, limits, method)
    if options.map and gaps:
        _map(project, options.map, gaps[0], pairs)
    if stopped:
        note(f"stopped: {len(gaps)} of {len(pairs)} pairs are done, the rest is not checked")
        return 1
    if not motion.reached.all():
        print(f"knucklepath clearance: {explain_limit(motion)}", file=sys.stderr)
        return 1
    return int(any(gap.verdict != "clear" for gap in gaps) or not all(limit.ok for limit in limits))


def _limits(project: Project, motion: Motion) -> list[LimitResult]:
    """Joint angles, spring stroke, drive shaft and lock-up over the same motion."""
    travel, rack = ((float(axis.min()), float(axis.max())) for axis in (motion.travel_mm, motion.rack_mm))
    return check_limits(project.corner, travel, rack, project.joint_limits, project.drive_shaft)


def _check(project: Project, motion: Motion, pairs: Sequence[Pair], tolerance: float) -> tuple[list[Gap], str, bool]:
    """The gaps, how they were found, and whether the user stopped it."""
    finished: list[Gap] = []
    with counting("pairs") as progress:
        try:
            from knucklepath.kinematics.clearance.proved import engine_is_compiled, proved_gaps
        except ImportError:
            note("numba is not installed, so gaps are sampled, not proven; to prove them: pip install numba")
            return sampled_gaps(motion, pairs, tolerance_mm=tolerance, progress=progress), "sampled", False
        if pairs and not engine_is_compiled():
            note("compiling the proof engine for this machine; this takes some seconds, once")
        limits = [(float(axis.min()), float(axis.max())) for axis in (motion.travel_mm, motion.rack_mm)]
        try:
            gaps = proved_gaps(
                project.corner, pairs, *limits, tolerance_mm=tolerance, progress=progress, finished=finished
            )
        except KeyboardInterrupt:
            return worst_first(finished), "proven", True
    return gaps, "proven", False


def _map(project: Project, out: str, gap: Gap, pairs: Sequence[Pair]) -> None:
    """Draw the smallest gap of the worst pair over travel and rack."""
    from knucklepath.viewer.exports.gap_map import write_gap_map

    pair = next(pair for pair in pairs if (pair.a.name, pair.b.name) == gap.between)
    write_gap_map(project, pair, gap, out)
    print(out)


def _one_pair(text: str, project: Project) -> tuple[ClearanceRule, ...]:
    """The rule for --pair A,B, with the gap that the project asks of that pair."""
    names = [word.strip() for word in text.split(",")]
    if len(names) != 2 or not all(names):
        raise UsageError(f"--pair: '{text}' is not a pair; write for example --pair tyre,lower_arm")
    a, b = names
    asked = [rule.gap for rule in project.clearances if {rule.a, rule.b} in ({a, b}, {a, "*"}, {b, "*"}, {"*"})]
    relief = [rule.relief for rule in project.clearances if {rule.a, rule.b} == {a, b}]
    return (ClearanceRule(a, b, max(asked, default=0.0), max(relief, default=0.0)),)


def _show(project: Project, gaps: Sequence[Gap], limits: Sequence[LimitResult], method: str) -> None:
    from rich.console import Console
    from rich.markup import escape
    from rich.table import Table

    console = Console()
    if not console.is_terminal:
        console = Console(width=WIDE)
    console.print(f"[bold]{escape(project.title)}[/bold]  smallest gaps over the whole motion, worst first")
    table = Table(box=None, header_style="bold", padding=(0, 1))
    for heading in ("between", "and", "verdict"):
        table.add_column(heading)
    for heading in ("gap\nmm", "proven\nmm", "required\nmm"):
        table.add_column(heading, justify="right")
    table.add_column("at")
    for gap in gaps:
        loud = gap.verdict in ("tight", "touching")
        table.add_row(
            *(escape(name) for name in gap.between),
            f"[bold]{gap.verdict}[/bold]" if loud else gap.verdict,
            figure(gap.gap_mm, "gap"),
            "–" if gap.proven_gap_mm is None else figure(gap.proven_gap_mm, "gap"),
            figure(gap.required_mm, "mm"),
            pose_text(project, gap),
        )
    console.print(table)
    if limits:
        console.print(_limit_table(project, limits))
    console.print(ASSUMPTIONS if method == "proven" else SAMPLED, highlight=False)
    for text in dict.fromkeys(gap.note for gap in gaps if gap.note):
        console.print(text, highlight=False, markup=False)
    console.print(CAUTION, style="italic", highlight=False)


def _limit_table(project: Project, limits: Sequence[LimitResult]) -> Table:
    from rich.markup import escape
    from rich.table import Table

    table = Table(box=None, header_style="bold", padding=(0, 1))
    for heading, justify in (
        ("limit", "left"),
        ("", "left"),
        ("extreme", "right"),
        ("allowed", "right"),
        ("at", "left"),
    ):
        table.add_column(heading, justify=justify)  # type: ignore[arg-type]
    for limit in limits:
        word = "kept" if limit.ok else "[bold]exceeded[/bold]"
        sign = "≤" if limit.kind == "at most" else "≥"
        table.add_row(
            escape(limit.name),
            word,
            f"{figure(limit.extreme, 'mm')} {limit.unit}",
            f"{sign} {figure(limit.limit, 'mm')} {limit.unit}",
            f"{pose_text(project, limit)}{': ' + escape(limit.note) if limit.note else ''}",
        )
    return table
