"""Make README's pictures again: ``python assets/make_readme_pictures.py``. The geometry is invented."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from knucklepath.kinematics.clearance.grid import gap_grid
from knucklepath.kinematics.clearance.pairs import Pair
from knucklepath.kinematics.clearance.primitives import ball
from knucklepath.kinematics.clearance.proved import proved_gaps
from knucklepath.kinematics.clearance.solids import Solid
from knucklepath.kinematics.motion import solve_motion
from knucklepath.kinematics.wheel import Corner, Wheel
from knucklepath.plugins.layouts.double_a_arm import LAYOUT
from knucklepath.viewer.cli import main as knucklepath
from knucklepath.viewer.theme import LIGHT

HERE = Path(__file__).parent
FOLDER = HERE / "readme"
TRAVEL, RACK = (-50.0, 60.0), (-30.0, 30.0)


def missed_by_a_grid() -> None:
    """Two balls of 0.2 mm that meet at one spot; the grid's poses around it, and what the proof found."""
    corner = Corner(LAYOUT.mechanism(LAYOUT.example), Wheel(np.array(LAYOUT.example["wheel.centre"]), 280.0))
    spot = (TRAVEL[0] + 30.5 * 110.0 / 60.0, RACK[0] + 12.5 * 60.0 / 40.0)
    tip = corner.wheel.centre + np.array([210.0, -60.0, 130.0])
    met = solve_motion(corner, *spot).point("wheel", tip)
    pair = Pair(Solid("tip", "wheel", *ball(tip, 0.2, 12)), Solid("stop", "chassis", *ball(met, 0.2, 12)), 0.5)
    (gap,) = proved_gaps(corner, [pair], TRAVEL, RACK)
    travel, rack = np.linspace(*TRAVEL, 61), np.linspace(*RACK, 41)
    coarse = gap_grid(corner, pair, travel, rack)
    near_u, near_v = np.linspace(spot[0] - 5.0, spot[0] + 5.0, 141), np.linspace(spot[1] - 5.0, spot[1] + 5.0, 141)
    fine = gap_grid(corner, pair, near_u, near_v)
    ink, tight, muted = (LIGHT.colour(token) for token in ("ink", "gap-tight", "muted"))
    figure = Figure(figsize=(9.6, 5.0), dpi=110, facecolor=LIGHT.colour("background"))
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.08, 0.13, 0.5, 0.72))
    axes.contourf(near_v, near_u, fine, levels=[0.0, pair.required_mm], colors=[tight], alpha=0.45)
    lines = axes.contour(near_v, near_u, fine, levels=[0.5, 1, 2, 3, 4, 5], colors=muted, linewidths=0.8)
    axes.clabel(lines, fmt="%g mm", fontsize=9)
    rows = np.abs(travel - spot[0]) < 5.0
    columns = np.abs(rack - spot[1]) < 5.0
    u, v = np.meshgrid(travel[rows], rack[columns], indexing="ij")
    axes.plot(v, u, "o", color=LIGHT.colour("accent"), markersize=5)
    axes.plot(gap.rack_mm, gap.travel_mm, "X", color=tight, markeredgecolor=ink, markersize=14)
    axes.set_xlabel("rack, mm", fontsize=11)
    axes.set_ylabel("travel, mm", fontsize=11)
    figure.text(0.08, 0.91, "A contact between the poses of a grid", fontsize=15, fontweight="bold", color=ink)
    text = (
        f"dots: poses of a 61 × 41 grid;\nthe smallest gap at any of its\n2,501 poses is {coarse.min():.2f} mm,\n"
        f"so {pair.required_mm:g} mm seem kept\n\n"
        f"cross: the touch that the proof\nfound, in {gap.evaluations} evaluations,\n"
        f"at travel {gap.travel_mm:+.2f} mm,\n"
        f"rack {gap.rack_mm:+.2f} mm\n\nshaded: gap below {pair.required_mm:g} mm"
    )
    figure.text(0.63, 0.82, text.replace("-", "−"), fontsize=12, color=ink, va="top", linespacing=1.5)
    figure.savefig(FOLDER / "missed-by-a-grid.png")


def main() -> None:
    """Write all of them."""
    demo = str(HERE / "hill_climb_front")
    corner = ["picture", demo, str(FOLDER / "corner.png"), "--travel", "15", "--rack", "8", "--size", "1280x720"]
    knucklepath(corner)
    knucklepath(["clearance", demo, "--pair", "tyre,bodywork stay", "--map", str(FOLDER / "gap-map.png")])
    missed_by_a_grid()


if __name__ == "__main__":
    main()
