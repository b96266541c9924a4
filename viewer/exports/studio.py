"""Frames for pictures and movies: a scene off screen, drawn large, written on and brought down to size.

VTK and pyvista are imported when the first studio opens.
"""

from __future__ import annotations

import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from datetime import datetime
from difflib import get_close_matches
from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from PIL import Image

from knucklepath.kinematics.corner import corner_readings
from knucklepath.kinematics.errors import KnucklepathError
from knucklepath.kinematics.motion import Motion, solve_motion
from knucklepath.plugins.overlays.glyphs import Label, Overlay, minus
from knucklepath.plugins.registry import Registry
from knucklepath.viewer import CAUTION
from knucklepath.viewer.annotations import Annotator, Caption, Figure
from knucklepath.viewer.drawing_check import can_draw
from knucklepath.viewer.looks import NAMES, Look, look
from knucklepath.viewer.project import Project
from knucklepath.viewer.theme import theme, type_scale

Array: TypeAlias = NDArray[np.float64]

#: Frames are drawn this much larger and brought down, which smooths every edge; very large ones as they are.
TIMES, MOST_DRAWN_PX = 2, 8192
#: Nobody waits for a file as for a window: it is drawn from whole meshes up to this many triangles.
MOST_TRIANGLES = 500_000
#: Spacing of the path's poses, mm of travel: ticks fall on poses.
PATH_STEP_MM = 2.0
#: Readings that a picture shows, with their digits, unit as written, and widest number.
SHOWN = (
    ("camber", "Camber", 2, "°", "−88.88°"),
    ("toe", "Toe", 2, "°", "−88.88°"),
    ("half_track_change", "Half-track change", 1, "\N{THIN SPACE}mm", "−888.8"),
    ("roll_centre_height", "Roll centre above ground", 0, "\N{THIN SPACE}mm", "−8888"),
    ("caster", "Caster", 1, "°", "−88.8°"),
)
SIGNED = ("camber", "toe", "half_track_change")
#: Roles of glyphs that stand for loads and gaps: a picture that has them carries the caution.
CAUTIOUS_ROLES = ("tension", "compression", "gap-line", "gap-tight")


def chosen_overlays(registry: Registry, look_name: str, show: Sequence[str] | None) -> tuple[Overlay, ...]:
    """The overlays that were asked for, or those that are standard in a look.

    Raises
    ------
    KnucklepathError : there is no such overlay; with the nearest id.
    """
    if show is None:
        standing = look_name if look_name in NAMES else "corner"
        return tuple(overlay for overlay in registry.overlays.values() if standing in overlay.standard)
    for name in show:
        if name not in registry.overlays:
            near = get_close_matches(name, list(registry.overlays), n=1)
            hint = f"did you mean '{near[0]}'? " if near else ""
            raise KnucklepathError(
                f"--show: there is no overlay '{name}'; {hint}overlays: {', '.join(registry.overlays)}"
            )
    return tuple(overlay for overlay in registry.overlays.values() if overlay.id in show)


def path_of(project: Project, rack_mm: float) -> Motion:
    """The motion over the project's travel at one rack displacement; design and every 10 mm are among the poses."""
    first, last = -project.rebound, project.bump
    inner = np.arange(np.ceil(first / PATH_STEP_MM), np.floor(last / PATH_STEP_MM) + 1.0) * PATH_STEP_MM
    return solve_motion(project.corner, np.unique(np.concatenate(([first], inner, [last]))), rack_mm)


class Studio:
    """Draws frames of a project.

    Parameters
    ----------
    look_text : a named look, or "AZ,EL"; show : ids of overlays, None for the look's own; size : px of a frame.
    """

    def __init__(
        self,
        project: Project,
        *,
        look_text: str,
        show: Sequence[str] | None,
        size: tuple[int, int],
        dark: bool,
        rack_mm: float,
    ) -> None:
        self.look: Look = look(look_text)
        overlays = chosen_overlays(project.registry, self.look.name, show)
        report = can_draw()
        if not report.ok:
            raise KnucklepathError(f"this machine cannot draw: {report.reason}. To put it right: {report.remedy}")
        self.project, self.size, self._theme = project, size, theme(dark)
        self._times = TIMES if TIMES * max(size) <= MOST_DRAWN_PX else 1
        with _quiet_vtk():
            import pyvista

            from knucklepath.viewer.scene import Scene

            drawn = [self._times * side for side in size]
            plotter: Any = pyvista.Plotter(off_screen=True, window_size=drawn, lighting="none")
            self._plotter, self._window = plotter, plotter.render_window
            self._window.SetMultiSamples(0)
            self.scene = Scene(
                self._plotter,
                project.corner,
                project.solids(),
                path_of(project, rack_mm),
                overlays=overlays,
                theme=self._theme,
                pixel_ratio=self._times * type_scale(*size),
                most_triangles=MOST_TRIANGLES,
            )
            # drawn large and brought down, edges are smooth already
            self.scene.renderer.SetUseFXAA(self._times == 1)
            camera = self.scene.look(self.look, size[0] / size[1])
            self._window.Render()
        self.annotator = Annotator(size, camera, self._theme, project.corner.wheel.centre)
        self.caption: Caption | None = None
        self._texts: dict[str, str] = {}

    def __enter__(self) -> Studio:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Give the graphics memory back."""
        self._plotter.close()

    def frame(self, pose: Motion, case: Any = None, *, new_numbers: bool = True) -> Image.Image:
        """Draw a pose of shape ().

        new_numbers : False keeps the numbers and labels' words of the frame before.
        """
        self.scene.show(pose, case)
        labels = {item.key: item.label for item in self.scene.labels}
        if new_numbers or self.caption is None:
            self._texts = {key: label.text for key, label in labels.items()}
            cautious = case is not None or any(glyph.role in CAUTIOUS_ROLES for glyph in self.scene.glyphs)
            self.caption = self._words(pose, CAUTION if cautious else "")
        kept: dict[str, Label] = {
            key: replace(label, text=self._texts.get(key, label.text)) for key, label in labels.items()
        }
        return self.annotator.finish(self._draw(), self.caption, kept)

    def faults(self) -> Iterator[str]:
        """What to say about overlays that failed, with the distribution that brought them."""
        for name, reason in self.scene.faults.items():
            yield f"overlay '{name}' of {self.project.registry.origin.get(name, '?')} is left out: {reason}"

    def _draw(self) -> Image.Image:
        from knucklepath.viewer.vtk_arrays import drawn_pixels

        return Image.fromarray(drawn_pixels(self._window), "RGB")

    def _words(self, pose: Motion, caution: str) -> Caption:
        project = self.project
        place = f"travel {signed(float(pose.travel_mm), 1)}\N{THIN SPACE}mm"
        if project.corner.steered:
            place += f" · rack {signed(float(pose.rack_mm), 1)}\N{THIN SPACE}mm"
        date = datetime.fromtimestamp(project.path.stat().st_mtime).date().isoformat()
        return Caption(
            title=project.title,
            pose=f"{place} · {self.look.title}",
            source=f"{project.path.name}, {date}",
            figures=figures(pose, project.registry),
            caution=caution,
        )


def signed(value: float, digits: int) -> str:
    """A number with its sign, + included; zero has none."""
    text = f"{value:+.{digits}f}"
    return f"{0.0:.{digits}f}" if float(text) == 0.0 else minus(text)


def figures(pose: Motion, registry: Registry) -> tuple[Figure, ...]:
    """The readings that a picture shows; those that do not exist for the layout are left out."""
    wanted = {name for name, *_ in SHOWN}
    readings = [reading for reading in registry.readings if reading.id in wanted]
    values = corner_readings(pose, readings)
    by_id = {reading.id: float(values[reading.column]) for reading in readings if reading.column in values}
    shown = []
    for name, title, digits, unit, widest in SHOWN:
        value = by_id.get(name, float("nan"))
        if np.isnan(value):
            continue
        if np.isinf(value):
            number = "∞" if value > 0.0 else "−∞"
        else:
            number = signed(value, digits) if name in SIGNED else minus(f"{value:.{digits}f}")
        # a degree sign belongs to the number, another unit follows it in smaller type
        if unit == "°":
            number, unit = number + unit, ""
        shown.append(Figure(title, number, unit, widest))
    return tuple(shown)


@contextmanager
def _quiet_vtk() -> Iterator[None]:
    """Keep VTK from complaining about a missing display while it finds its way of drawing without one."""
    from vtkmodules.vtkCommonCore import vtkLogger

    before = vtkLogger.GetCurrentVerbosityCutoff()
    vtkLogger.SetStderrVerbosity(vtkLogger.VERBOSITY_OFF)
    try:
        yield
    finally:
        vtkLogger.SetStderrVerbosity(before)
        sys.stderr.flush()
