"""Glyph shapes as VTK actors: one per kind, role and width, filled anew for each pose. Knows no overlay.

What lies behind a solid shows through it faintly, so that a line can be followed through the knuckle.
"""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray
from vtkmodules.vtkCommonCore import vtkPoints
from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkPolyData
from vtkmodules.vtkRenderingCore import vtkActor, vtkPolyDataMapper

from knucklepath.viewer.glyph_shapes import Ground, Shapes
from knucklepath.viewer.theme import BEHIND_OPACITY, Theme
from knucklepath.viewer.vtk_arrays import set_cells, set_points, to_vtk

Array: TypeAlias = NDArray[np.float64]

#: Depth units by which the faint copy comes forward: more than any scene is deep.
FORWARD = -66_000.0


class _Batch:
    """One kind of shape in one role: an actor, and a faint copy that solids do not hide."""

    def __init__(self, renderer: Any, colour: tuple[float, float, float], *, ghost: bool, lit: bool) -> None:
        self.data = vtkPolyData()
        self.actors = []
        for faint in (False, True)[: 1 + ghost]:
            mapper: Any = vtkPolyDataMapper()
            mapper.SetInputData(self.data)
            actor = vtkActor()
            actor.SetMapper(mapper)
            actor.PickableOff()
            look = actor.GetProperty()
            look.SetColor(*colour)
            if lit:
                look.SetAmbient(0.75)
                look.SetDiffuse(0.3)
            else:
                look.LightingOff()
            if faint:
                look.SetOpacity(BEHIND_OPACITY)
                mapper.SetResolveCoincidentTopologyToPolygonOffset()
                mapper.SetRelativeCoincidentTopologyLineOffsetParameters(0.0, FORWARD)
                mapper.SetRelativeCoincidentTopologyPolygonOffsetParameters(0.0, FORWARD)
                mapper.SetRelativeCoincidentTopologyPointOffsetParameter(FORWARD)
            renderer.AddActor(actor)
            self.actors.append(actor)
        self._filled: tuple[Array, NDArray[np.int64]] = (np.empty((0, 3)), np.empty(0, dtype=np.int64))
        self._cells = vtkCellArray()
        self._points = vtkPoints()
        self.data.SetPoints(self._points)

    def fill(self, points: Array, lengths: NDArray[np.int64], kind: str) -> None:
        """Take points (n, 3) in runs of ``lengths``: each run one line, triangle or dot. Does nothing if none moved."""
        before, self._filled = self._filled, (points, lengths)
        same_cells = np.array_equal(lengths, before[1])
        if same_cells and np.array_equal(points, before[0]):
            return
        set_points(self._points, points)
        if not same_cells:
            set_cells(self._cells, lengths, np.arange(len(points)))
            {"line": self.data.SetLines, "triangle": self.data.SetPolys, "dot": self.data.SetVerts}[kind](self._cells)
        self.data.Modified()

    def show(self, visible: bool) -> None:
        """Show or hide it."""
        for actor in self.actors:
            actor.SetVisibility(visible)


class GlyphActors:
    """All glyphs of a scene. ``pixel_ratio``: widths and dots grow with it."""

    def __init__(self, renderer: Any, theme: Theme, pixel_ratio: float) -> None:
        self._renderer, self._theme, self._ratio = renderer, theme, pixel_ratio
        self._batches: dict[tuple[Any, ...], _Batch] = {}
        self._grids: dict[str, Array] = {}
        # see-through things are drawn in the order in which they are made: the ground lies under all
        self._batch("grid", "ground", 0.0)

    @property
    def actors(self) -> list[vtkActor]:
        """Every actor, shown or not."""
        return [actor for batch in self._batches.values() for actor in batch.actors]

    def show(self, shapes: Shapes) -> None:
        """Draw these shapes and no others."""
        used: set[tuple[Any, ...]] = set()
        for (role, width), sheaves in shapes.strokes.items():
            batch = self._batch("line", role, width)
            for actor in batch.actors:
                actor.GetProperty().SetLineWidth(width * self._ratio)
            lengths = np.concatenate([np.full(len(sheaf), sheaf.shape[1]) for sheaf in sheaves])
            batch.fill(np.concatenate([sheaf.reshape(-1, 3) for sheaf in sheaves]), lengths, "line")
            used.add(("line", role, width))
        for role, soups in shapes.solids.items():
            soup = np.concatenate(soups)
            self._batch("triangle", role, 0.0).fill(
                soup.reshape(-1, 3), np.full(len(soup), 3, dtype=np.int64), "triangle"
            )
            used.add(("triangle", role, 0.0))
        for (role, pixels), spots in shapes.dots.items():
            batch = self._batch("dot", role, pixels)
            for actor in batch.actors:
                look = actor.GetProperty()
                look.SetPointSize(pixels * self._ratio)
                look.RenderPointsAsSpheresOn()
            batch.fill(np.stack(spots), np.ones(len(spots), dtype=np.int64), "dot")
            used.add(("dot", role, pixels))
        for role, ground in shapes.grids.items():
            self._show_grid(role, ground)
            used.add(("grid", role, 0.0))
        for key, batch in self._batches.items():
            batch.show(key in used)

    def _batch(self, kind: str, role: str, size: float) -> _Batch:
        key = (kind, role, size)
        if key not in self._batches:
            self._batches[key] = _Batch(
                self._renderer, self._theme.rgb(role), ghost=kind != "grid", lit=kind == "triangle"
            )
        return self._batches[key]

    def _show_grid(self, role: str, ground: Ground) -> None:
        """The ground, which fades away; made once, then only lifted."""
        batch = self._batch("grid", role, 0.0)
        if self._grids.get(role) is not ground.lines:
            self._grids[role] = ground.lines
            count, length = ground.strength.shape
            batch.fill(ground.lines.reshape(-1, 3), np.full(count, length), "line")
            faded = np.tile(np.array([*self._theme.rgb(role), 1.0]), (count * length, 1))
            faded[:, 3] = ground.strength.reshape(-1)
            colours = np.round(255.0 * faded).astype(np.uint8)
            batch.data.GetPointData().SetScalars(to_vtk(colours))
            batch.actors[0].GetProperty().SetLineWidth(self._ratio)
            batch.actors[0].ForceTranslucentOn()
        batch.actors[0].SetPosition(0.0, 0.0, ground.height)
