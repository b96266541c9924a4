"""The gap of one pair over travel and rack as a picture: where it gets tight, and how far that is from design."""

from __future__ import annotations

from typing import TypeAlias

import numpy as np
from numpy.typing import NDArray

from knucklepath.kinematics.clearance.gap import Gap
from knucklepath.kinematics.clearance.grid import gap_grid
from knucklepath.kinematics.clearance.pairs import Pair
from knucklepath.viewer import CAUTION
from knucklepath.viewer.exports.writing import whole_file
from knucklepath.viewer.project import Project
from knucklepath.viewer.theme import LIGHT

Array: TypeAlias = NDArray[np.float64]

#: Poses of the map, travel × rack.
GRID = (61, 41)


def write_gap_map(project: Project, pair: Pair, gap: Gap, out: str) -> None:
    """Draw the distance of a pair over the motion, with the contour at the requirement and the worst pose marked.

    An axle without a rack gets a curve of gap against travel instead.

    Raises
    ------
    UsageError : the folder of ``out`` is not there.
    """
    travel = np.linspace(-project.rebound, project.bump, GRID[0])
    each_way = (project.rack_each_way if project.corner.steered else None) or 0.0
    rack = np.linspace(-each_way, each_way, GRID[1]) if each_way else np.zeros(1)
    values = gap_grid(project.corner, pair, travel, rack)
    with whole_file(out) as path:
        _draw(project, pair, gap, travel, rack, values, str(path))


def _draw(project: Project, pair: Pair, gap: Gap, travel: Array, rack: Array, values: Array, path: str) -> None:
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    ink, muted, hair = (LIGHT.colour(token) for token in ("ink", "muted", "hair"))
    figure = Figure(figsize=(9.6, 6.4), dpi=125, facecolor=LIGHT.colour("background"))
    FigureCanvasAgg(figure)
    axes = figure.add_axes((0.085, 0.15, 0.78, 0.66))
    axes.set_facecolor(LIGHT.colour("plate"))
    for side in axes.spines.values():
        side.set_color(hair)
    axes.tick_params(colors=muted, labelsize=11)
    axes.set_ylabel("travel, mm (bump up)", color=ink, fontsize=12)
    if len(rack) > 1:
        _field(figure, axes, pair, gap, travel, rack, values)
    else:
        axes.plot(values[:, 0], travel, color=ink, linewidth=2.0)
        axes.axvline(pair.required_mm, color=LIGHT.colour("gap-tight"), linestyle="--", linewidth=2.0)
        axes.plot(gap.gap_mm, gap.travel_mm, "o", color=LIGHT.colour("gap-tight"), markersize=10)
        axes.axhline(0.0, color=hair, linewidth=1.0)
        axes.set_xlabel("gap, mm (dashed: required)", color=ink, fontsize=12)
    title = f"{pair.a.name} to {pair.b.name}: {gap.verdict}"
    where = f"smallest gap {gap.gap_mm:.2f} mm at travel {gap.travel_mm:+.1f} mm"
    if len(rack) > 1:
        where += f", rack {gap.rack_mm:+.1f} mm"
    text = f"{where}; required {pair.required_mm:g} mm".replace("-", "−")
    figure.text(0.085, 0.94, title, color=ink, fontsize=17, fontweight="bold")
    figure.text(0.085, 0.895, project.title, color=muted, fontsize=11.5)
    figure.text(0.085, 0.85, text, color=ink, fontsize=11.5)
    figure.text(0.085, 0.025, CAUTION.replace(". ", ".\n", 1), color=muted, fontsize=8.5)
    figure.savefig(path, format="png")


def _field(figure: object, axes: object, pair: Pair, gap: Gap, travel: Array, rack: Array, values: Array) -> None:
    """The coloured field with contours; tight is told by colour, by hatching and by the labelled contour."""
    from typing import Any, cast

    from matplotlib.colors import LinearSegmentedColormap
    from matplotlib.ticker import MaxNLocator

    axes_, figure_ = cast(Any, axes), cast(Any, figure)
    ink, muted, tight = (LIGHT.colour(token) for token in ("ink", "muted", "gap-tight"))
    scale = LinearSegmentedColormap.from_list(
        "gap", [LIGHT.colour("accent"), LIGHT.colour("ground"), LIGHT.colour("plate")]
    )
    finite = values[np.isfinite(values)]
    levels = MaxNLocator(24, steps=[1, 2, 2.5, 5, 10]).tick_values(0.0, max(float(finite.max()), 1.0))
    field = axes_.contourf(rack, travel, values, levels=levels, cmap=scale)
    lines = axes_.contour(rack, travel, values, levels=levels[2::3], colors=muted, linewidths=0.6)
    axes_.clabel(lines, fmt="%g mm", fontsize=9)
    required = pair.required_mm
    if required > 0.0 and finite.min() < required < finite.max():
        axes_.contourf(rack, travel, values, levels=[-1.0, required], colors="none", hatches=["////"])
        edge = axes_.contour(rack, travel, values, levels=[required], colors=tight, linewidths=2.5)
        axes_.clabel(edge, fmt={required: f"required {required:g} mm"}, fontsize=10.5)
    axes_.plot(0.0, 0.0, "o", color=ink, markersize=6)
    axes_.annotate("design", (0.0, 0.0), xytext=(8, 6), textcoords="offset points", color=ink, fontsize=10.5)
    axes_.plot(
        gap.rack_mm, gap.travel_mm, "X", color=tight, markeredgecolor=ink, markersize=14, clip_on=False, zorder=9
    )
    left = gap.rack_mm > (rack[0] + rack[-1]) / 2.0
    axes_.annotate(
        f"smallest {gap.gap_mm:.2f} mm",
        (gap.rack_mm, gap.travel_mm),
        xytext=(-60 if left else 60, -64 if gap.travel_mm > travel.mean() else 50),
        textcoords="offset points",
        ha="right" if left else "left",
        color=ink,
        fontsize=11.5,
        fontweight="bold",
        arrowprops={"arrowstyle": "-", "color": ink},
        bbox={"boxstyle": "round,pad=0.3", "facecolor": LIGHT.colour("plate"), "edgecolor": tight},
    )
    axes_.set_xlabel("rack, mm (+ to the left)", color=ink, fontsize=12)
    bar = figure_.colorbar(field, cax=figure_.add_axes((0.89, 0.15, 0.02, 0.66)))
    bar.set_label("gap, mm", color=ink, fontsize=11)
    bar.ax.tick_params(colors=muted, labelsize=10)
    bar.outline.set_edgecolor(LIGHT.colour("hair"))
